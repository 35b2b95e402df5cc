import { shortDateText, type PlainDate } from '../../time/dates';
import { isUnit, unitText } from '../../units/units';
import { formulaOf, type FormulaKey } from '../measurement/formulas';
import type { StudyDefinition } from './definition';
import { openingWords } from './words';

/** What the fields of a definition are called where a change is told. */
const fieldNames: Record<string, string> = {
	code: 'study code',
	plannedSubjects: 'planned subjects',
	stratifyBySite: 'balance within each site',
	allocation: 'method of allocation',
	enrolmentPlan: 'enrolment plan',
	baselineVisit: 'baseline visit',
	primaryMeasure: 'primary measure',
	timeUnit: 'unit of time in the analysis',
	lostAfterAttempts: 'contact attempts before lost to follow-up',
	adverseEvents: 'list of adverse events',
	eligibilitySigned: 'eligibility signed by the investigator',
	zone: 'time zone',
	openingHours: 'opening hours',
	before: 'window before',
	after: 'window after',
	order: 'place in the order',
	lengthMinutes: 'room needed',
	showLast: 'last value shown',
	couldRevealArm: 'could reveal the arm',
	notDoneReasons: 'reasons for not done',
	alsoIn: 'also entered in',
	hardLow: 'lowest value accepted',
	hardHigh: 'highest value accepted',
	softLow: 'asked about below',
	softHigh: 'asked about above',
	softChange: 'asked about a change',
	limitsSource: 'source of the limits',
	readingsNeeded: 'readings needed',
	summaryDecimals: 'decimals of the summary',
	summary: 'summary of the readings',
	maxLength: 'most characters',
	future: 'days in the future',
	derivedBy: 'formula',
	from: 'approved on',
	orEqual: 'equal values',
	weight: 'when it is broken'
};

export const fieldWords = (field: string): string => fieldNames[field] ?? field;

const several = (amount: number, unit: string) =>
	`${amount} ${unit}${Math.abs(amount) === 1 ? '' : 's'}`;
const quoted = (text: string) => `“${text}”`;
type Fields = Record<string, unknown>;
const isFields = (value: unknown): value is Fields =>
	typeof value === 'object' && value !== null && !Array.isArray(value);
const day = (text: unknown) => shortDateText(String(text) as PlainDate);

const nameIn = (items: readonly { key: string; name: string }[], key: string) =>
	items.find((each) => each.key === key)?.name ?? key;

/** 'enrolment', or the name of the visit */
function anchorWords(anchor: string, definition: StudyDefinition): string {
	return anchor.startsWith('visit:')
		? quoted(nameIn(definition.visits, anchor.slice('visit:'.length)))
		: anchor;
}

function referenceWords(reference: string, definition: StudyDefinition): string {
	const colon = reference.indexOf(':');
	const [kind, key] = [reference.slice(0, colon), reference.slice(colon + 1)];
	const name = nameIn(kind === 'measure' ? definition.measures : definition.characteristics, key);
	return kind === 'age' ? `age from ${quoted(name)}` : quoted(name);
}

const special: Record<string, (value: never, definition: StudyDefinition) => string> = {
	anchor: (value: string, definition) => anchorWords(value, definition),
	openingHours: (value: { weekday: number; opens: string; closes: string }[]) =>
		openingWords(value).replace(/\.$/, '') + ` (${value.length} spans)`,
	baselineVisit: (value: string, definition) => quoted(nameIn(definition.visits, value)),
	primaryMeasure: (value: string, definition) => quoted(nameIn(definition.measures, value)),
	lengthMinutes: (value: number) => several(value, 'minute'),
	unit: (value: string) => (isUnit(value) && unitText(value)) || value,
	alsoIn: (value: string[]) =>
		value.map((code) => (isUnit(code) && unitText(code)) || code).join(', '),
	couldRevealArm: (value: { enteredBy: string }) => `yes, entered by the ${value.enteredBy}`,
	allocation: (value: { method: string }) => value.method.replaceAll('-', ' '),
	closures: (value: { from: string; to: string; reason: string }[]) =>
		value.map((each) => `${day(each.from)} to ${day(each.to)} (${each.reason})`).join('; '),
	enrolmentPlan: (value: {
		from: string;
		months: number;
		sites: { site: string; subjects: number }[];
	}) =>
		`${several(value.months, 'month')} from ${value.from}: ${value.sites.map((each) => `${each.site} ${each.subjects}`).join(', ') || 'no sites'}`,
	minors: (value: { majority: number; assentFrom: number }) =>
		`of age at ${value.majority}, asked to assent from ${value.assentFrom}`,
	softChange: (value: { from: string; by: string; size: number }) =>
		`of more than ${value.size}${value.by === 'percent' ? ' %' : ''} from ${value.from === 'last' ? 'the last visit' : 'baseline'}`,
	derivedBy: (value: { formula: FormulaKey; inputs: Record<string, string> }, definition) =>
		`${formulaOf(value.formula).name} with ${
			Object.keys(value.inputs)
				.sort()
				.map((input) => `${input} ${referenceWords(value.inputs[input] ?? '', definition)}`)
				.join(', ') || 'no inputs'
		}`,
	from: (value: string) => day(value),
	weight: (value: string) => (value === 'soft' ? 'asks' : 'refuses'),
	showLast: (value: string) => (value === 'never' ? 'never' : `${value} entry`)
};

/** A field's value as people would say it. Whatever it is, a different value is told apart. */
export function valueWords(field: string, value: unknown, definition: StudyDefinition): string {
	if (value === undefined || value === null) return 'nothing';
	const known = special[field];
	if (known) return known(value as never, definition);
	if (typeof value === 'boolean') return value ? 'yes' : 'no';
	if (typeof value === 'number') return String(value);
	if (typeof value === 'string') return quoted(value);
	if (Array.isArray(value)) {
		if (value.length === 0) return 'none';
		return value
			.map((each) =>
				isFields(each) && 'key' in each
					? `${each.name} (${each.key})`
					: valueWords('', each, definition)
			)
			.join(', ');
	}
	if (isFields(value) && 'amount' in value && 'unit' in value)
		return several(Number(value.amount), String(value.unit));
	return Object.entries(value as Fields)
		.map(([name, inner]) => `${fieldWords(name)} ${valueWords(name, inner, definition)}`)
		.join(', ');
}
