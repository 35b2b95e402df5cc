import type { Finding } from './check';
import type { StudyDefinition } from './definition';

/** The parts of set-up, each at an address of its own. */
export const setupSections = [
	'study',
	'arms',
	'sites',
	'visits',
	'measures',
	'schedule',
	'eligibility'
] as const;
export type SetupSection = (typeof setupSections)[number];

export interface FindingPlace {
	section: SetupSection;
	/** List and key of the item, where it is about one. */
	list?: string;
	item?: string;
	/** Name of the field that takes the focus. */
	field?: string;
}

const sectionOf: Record<string, SetupSection> = {
	arms: 'arms',
	strata: 'arms',
	stratifyBySite: 'arms',
	allocation: 'arms',
	masked: 'arms',
	sites: 'sites',
	enrolmentPlan: 'sites',
	visits: 'visits',
	measures: 'measures',
	comparisons: 'measures',
	schedule: 'schedule',
	characteristics: 'eligibility',
	eligibility: 'eligibility',
	consentVersions: 'eligibility',
	minors: 'eligibility'
};

/** Where a finding’s path ends at an item, the field in which it is mended. */
const fieldOf: Record<string, (facts: Finding['problem']['facts']) => string> = {
	KEY_TWICE: () => 'name',
	WINDOWS_OVERLAP: () => 'before',
	WINDOW_EMPTY: () => 'before',
	WINDOW_MONTHS: () => 'before',
	WINDOW_ONE_DAY: () => 'after',
	VISITS_OUT_OF_ORDER: () => 'target',
	VISIT_TOO_LONG: () => 'lengthMinutes',
	LIMITS_INSIDE_OUT: (facts) => `${facts.kind}Low`,
	LIMITS_SOFT_OUTSIDE_HARD: () => 'softLow',
	LIMITS_MISSING: () => 'hardLow',
	UNIT_DOES_NOT_CONVERT: () => 'unit',
	REVEALING_UNMASKED: () => 'couldRevealArm',
	REVEALING_MIXED: () => 'couldRevealArm',
	READINGS_TOO_FEW: () => 'readingsNeeded',
	OPENING_HOURS_MISSING: () => 'openingHours',
	OPENING_HOURS_TOO_SHORT: () => 'openingHours'
};

/** Where in set-up a finding is mended. */
export function placeOf(
	{ path, problem }: Pick<Finding, 'path' | 'problem'>,
	definition: StudyDefinition
): FindingPlace {
	const [, root = '', index, rest] = /^(\w+)(?:\[(\d+)\])?(?:\.(.*))?$/.exec(path) ?? [];
	const { code, facts } = problem;
	const at = index === undefined ? undefined : Number(index);
	const keyed = (definition as unknown as Record<string, unknown>)[root];
	const item =
		at !== undefined && Array.isArray(keyed)
			? ((keyed[at] ?? {}) as Record<string, string | undefined>)
			: undefined;
	const pair = item?.lower && item.higher ? `${item.lower}<${item.higher}` : undefined;
	const key =
		pair ?? item?.key ?? item?.code ?? item?.version ?? (at === undefined ? undefined : index);
	if (code === 'MEASURE_NEVER_SCHEDULED' || code === 'FORMULA_INPUT_NOT_AT_VISIT')
		return { section: 'schedule', list: 'measures', ...(key ? { item: key } : {}) };
	if (code === 'VISIT_WITHOUT_MEASURES')
		return { section: 'schedule', list: 'visits', ...(key ? { item: key } : {}) };
	if (root === 'schedule') {
		const visit = rest?.replace(/\[\d+\]$/, '');
		return { section: 'schedule', list: 'visits', ...(visit ? { item: visit } : {}) };
	}
	const field = rest?.split(/[.[]/)[0] ?? fieldOf[code]?.(facts);
	return {
		section: sectionOf[root] ?? 'study',
		...(key !== undefined ? { list: root, item: key } : {}),
		...(field ? { field } : key === undefined ? { field: root } : {})
	};
}

/** The place as the end of an address: 'visits?item=month-3&field=before' */
export function placeText({ section, list, item, field }: FindingPlace): string {
	const asked = new URLSearchParams();
	if (list && list !== section) asked.set('list', list);
	if (item) asked.set('item', item);
	if (field) asked.set('field', field);
	const text = asked.toString();
	return text ? `${section}?${text}` : section;
}
