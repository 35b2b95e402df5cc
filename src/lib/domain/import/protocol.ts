import { problem } from '../problems';
import type { Characteristic, StudyDefinition } from '../study/definition';
import type { ImportRequest } from './import.input';
import type { CheckedRows, ImportedRow } from './rows';
import type { ImportProblem } from './table';

/** The most that a study definition holds. */
export const planLimits = { visits: 100, levels: 50, characteristics: 20, measures: 100 } as const;

const daysIn = { day: 1, week: 7, month: 365.25 / 12, year: 365.25 } as const;

/** A key made of what people call something; `taken` keeps two from being the same. */
export function keyFor(text: string, prefix: string, taken: Set<string>): string {
	const plain = text
		.normalize('NFKD')
		.replace(/\p{M}/gu, '')
		.toLowerCase()
		.replace(/[^a-z0-9]+/g, '-')
		.replace(/^-+|-+$/g, '');
	const stem = (/^[a-z]/.test(plain) ? plain : `${prefix}-${plain}`)
		.slice(0, 34)
		.replace(/-+$/g, '');
	let key = stem;
	for (let n = 2; taken.has(key); n++) key = `${stem}-${n}`;
	taken.add(key);
	return key;
}

const numberKey = (value: number) =>
	String(value)
		.replace('-', 'minus-')
		.replaceAll(/[^a-z0-9-]+/g, '-');

export interface OccasionName {
	/** What rows of this occasion share: the label, or the time. */
	match: string;
	name: string;
	key: string;
	/** Of the mean row, in days; orders the visits. */
	day: number;
	measures: Set<number>;
}

/** What tells a file's occasions apart: their labels, their times, or their order within each subject. */
export interface Occasions {
	by: 'label' | 'time' | 'order';
	/** What rows of one occasion share; '' where a row has no label. */
	matchOf: (row: ImportedRow) => string;
}

export function tellApart(request: ImportRequest, checked: CheckedRows): Occasions {
	if (request.visit !== undefined) return { by: 'label', matchOf: (row) => row.visit ?? '' };
	const times = new Set(checked.rows.map(({ time }) => time));
	if (request.time.kind === 'number' && times.size <= planLimits.visits)
		return { by: 'time', matchOf: (row) => String(row.time) };
	// Actual days differ from subject to subject: the first, the second, … are what they share.
	const counted = new Map<ImportedRow, string>();
	const seen = new Map<string, number>();
	for (const row of [...checked.rows].sort((a, b) => a.time - b.time || a.row - b.row)) {
		const place = (seen.get(row.subject) ?? 0) + 1;
		seen.set(row.subject, place);
		counted.set(row, String(place));
	}
	return { by: 'order', matchOf: (row) => counted.get(row) ?? '' };
}

/** The occasions that the file's rows share, in the order of their days. */
export function occasionsOf(checked: CheckedRows, { by, matchOf }: Occasions): OccasionName[] {
	const perUnit = daysIn[checked.timeUnit];
	const sums = new Map<string, { total: number; count: number; measures: Set<number> }>();
	for (const row of checked.rows) {
		const match = matchOf(row);
		if (match === '') continue;
		const sum = sums.get(match) ?? { total: 0, count: 0, measures: new Set<number>() };
		sum.total += row.time * perUnit;
		sum.count++;
		row.values.forEach((value, at) => {
			if (value !== null) sum.measures.add(at);
		});
		sums.set(match, sum);
	}
	const taken = new Set<string>();
	const unit = (time: number) => (Math.abs(time) === 1 ? checked.timeUnit : `${checked.timeUnit}s`);
	const nameOf = (match: string): string => {
		if (by === 'order') return `Occasion ${match}`;
		if (by === 'time') return `${match.replace('-', '−')} ${unit(Number(match))}`;
		return /^[\d.,\s-]+$/.test(match) ? `Visit ${match}` : match;
	};
	return [...sums.entries()]
		.map(([match, sum]) => ({ match, day: sum.total / sum.count, measures: sum.measures }))
		.sort((a, b) => a.day - b.day || (a.match < b.match ? -1 : 1))
		.map((each) => ({
			...each,
			name: nameOf(each.match),
			key: keyFor(
				by === 'label' ? each.match : `${by}-${numberKey(Number(each.match))}`,
				'visit',
				taken
			)
		}));
}

/** Days as the schedule holds them: whole, and in months where they are too many. */
function targetOf(day: number): StudyDefinition['visits'][number]['target'] {
	const whole = Math.round(day);
	if (Math.abs(whole) <= 1200) return { amount: whole, unit: 'day' };
	const months = Math.round(day / daysIn.month);
	return { amount: Math.max(-1200, Math.min(1200, months)), unit: 'month' };
}

/** Distinct values of a characteristic in words, in the order of the alphabet. */
export const levelsOf = (values: Iterable<number | string | null>): string[] =>
	[...new Set([...values].filter((each): each is string => typeof each === 'string'))].sort();

/** Characteristics as the mapping asks for them, each with the values of all subjects. */
export function traitsOf(request: ImportRequest, checked: CheckedRows) {
	return [
		...(request.characteristic
			? [
					{
						...request.characteristic,
						kind: 'choice' as const,
						values: checked.subjects.map(({ characteristic }) => characteristic)
					}
				]
			: []),
		...request.covariates.map((each, at) => ({
			column: each.column,
			name: each.name,
			kind: each.kind,
			values: checked.subjects.map(({ covariates }) => covariates[at] ?? null)
		}))
	];
}

/**
 * The protocol version that a file describes: its visits, measures and characteristics in the place of the draft's own.
 * Everything else (name, sites, arms, consent) stays as the draft has it. An imported visit has happened: its window is
 * the day itself.
 */
export function definitionFromFile(
	base: StudyDefinition,
	request: ImportRequest,
	checked: CheckedRows
): { definition: StudyDefinition; occasions: OccasionName[]; problems: ImportProblem[] } {
	const problems: ImportProblem[] = [];
	const add = (column: string | null, reason: ImportProblem['problem']) =>
		problems.push({ row: null, column, problem: reason });
	const apart = tellApart(request, checked);
	const occasions = occasionsOf(checked, apart);
	if (occasions.length > planLimits.visits)
		add(
			request.visit ?? request.time.column,
			problem('VISITS_TOO_MANY', {
				count: occasions.length,
				what: apart.by === 'label' ? 'visit labels' : 'occasions',
				limit: planLimits.visits
			})
		);
	const measureKeys = new Set<string>();
	const measures = request.measures.map((measure): StudyDefinition['measures'][number] => ({
		key: keyFor(measure.name, 'measure', measureKeys),
		name: measure.name,
		kind: 'number',
		unit: measure.unit,
		decimals: measure.decimals,
		showLast: 'after',
		notDoneReasons: ['Not done', missingInFile]
	}));
	const traitKeys = new Set<string>();
	const traits = traitsOf(request, checked);
	if (traits.length > planLimits.characteristics)
		add(
			null,
			problem('CHARACTERISTICS_TOO_MANY', {
				count: traits.length,
				limit: planLimits.characteristics
			})
		);
	const characteristics = traits.map((trait): Characteristic => {
		const key = keyFor(trait.name, 'characteristic', traitKeys);
		if (trait.kind === 'number')
			return { key, name: trait.name, kind: 'number', unit: '1', decimals: 6 };
		const levels = levelsOf(trait.values);
		if (levels.length < 2 || levels.length > planLimits.levels)
			add(
				trait.column,
				problem('LEVELS_WRONG', {
					name: trait.name,
					count: levels.length,
					limit: planLimits.levels
				})
			);
		const taken = new Set<string>();
		return {
			key,
			name: trait.name,
			kind: 'choice',
			choices: levels.map((level) => ({ key: keyFor(level, 'level', taken), name: level }))
		};
	});
	const everywhere = measures.map(({ key }) => key);
	const definition: StudyDefinition = {
		...base,
		characteristics,
		visits: occasions.map((occasion, at) => ({
			key: occasion.key,
			name: occasion.name.slice(0, 100),
			anchor: 'enrolment',
			target: targetOf(occasion.day),
			before: { amount: 0, unit: 'day' },
			after: { amount: 0, unit: 'day' },
			order: at,
			lengthMinutes: 30
		})),
		measures,
		comparisons: [],
		schedule: Object.fromEntries(
			occasions.map((occasion) => {
				const taken = everywhere.filter((_, at) => occasion.measures.has(at));
				return [occasion.key, taken.length > 0 ? taken : everywhere];
			})
		),
		baselineVisit: occasions[0]?.key ?? 'baseline',
		primaryMeasure: measures[0]?.key ?? 'measure',
		timeUnit: request.time.kind === 'number' ? request.time.unit : base.timeUnit
	};
	return { definition, occasions, problems };
}

/** Why there is no value where the file's cell is empty. */
export const missingInFile = 'Missing in the imported file';
