import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { StatsError } from '../errors.js';
import type { AnalysisPlan, Mean } from '../plan.js';
import { buildModelDesign, type BuiltDesign } from './build-model-design.js';
import type { Column, Columns } from './columns.js';
import { planWith, study } from './example.js';

const build = (change: Partial<AnalysisPlan> = {}, mean: Partial<Mean> = {}, data = study) =>
	buildModelDesign(data, planWith(change, mean));

/** The row of X that came from row `row` (from 0) of the data. */
function rowOfX({ design }: BuiltDesign, row: number): number[] {
	const at = design.rowOf.indexOf(row);
	return design.names.map((_, j) => design.x[j * design.n + at]!);
}

describe('rows and subjects', () => {
	const built = build({}, { covariates: [{ name: 'bmi', kind: 'numeric' }] });

	test('are gathered by subject and sorted by time, with the way back to the data', () => {
		const { design } = built;
		expect(design.subjects).toEqual(['b', 'a', 'c', 'd', 'e']);
		expect([...design.subjectStart]).toEqual([0, 2, 5, 7, 9, 11]);
		expect([...design.rowOf]).toEqual([0, 3, 2, 4, 1, 5, 12, 7, 9, 10, 11]);
		expect([...design.time]).toEqual([0, 2, 0, 2, 4, 0, 4, 0, 4, 0, 4]);
		expect([...design.y]).toEqual([5, 8, 4, 6, 7, 9, 9.5, 3, 2.5, 7, 8]);
		expect([...design.subjectGroup]).toEqual([1, 0, 1, 0, 1]);
		expect(design.groups).toEqual(['0', '1']);
	});

	test('a missing outcome is dropped by occasion, another missing value by row, and both are counted', () => {
		expect(built.counts).toEqual({
			rows: 14,
			observations: 11,
			subjects: 5,
			droppedSubjects: 1,
			droppedOutcomes: 1,
			droppedRows: 2,
			missingByVariable: [
				{ name: 'arm', rows: 1 },
				{ name: 'bmi', rows: 1 }
			],
			fewestPerSubject: 2,
			mostPerSubject: 3,
			baselineRows: 0
		});
		expect(built.dropped).toEqual([
			{ reason: 'outcome', variable: 'y', rows: 1 },
			{ reason: 'value', variable: 'arm', rows: 1 },
			{ reason: 'value', variable: 'bmi', rows: 1 }
		]);
	});

	test('a column the plan does not name is not looked at', () => {
		const odd = { ...study, notes: study.who!.length ? Array.from(study.who!, () => NaN) : [] };
		expect(buildModelDesign(odd, planWith()).counts.observations).toBe(12);
	});
});

describe('visits', () => {
	test('are ordered by mean time, or by number when their labels are numbers', () => {
		expect(build().design.visits).toEqual(['start', 'mid', 'end']);
		const codes = { start: '10', mid: '9', end: '2' };
		const numbered = Array.from(study.visit!, (v) => codes[v as keyof typeof codes]);
		expect(build({}, {}, { ...study, visit: numbered }).design.visits).toEqual(['2', '9', '10']);
	});

	test('one without a row in use is not among them', () => {
		const y = Array.from(study.y!, (v, i) => (study.visit![i] === 'mid' ? null : v));
		const { design } = build({}, {}, { ...study, y });
		expect(design.visits).toEqual(['start', 'end']);
		expect([...design.visit]).toEqual([...design.time].map((t) => (t === 0 ? 0 : 1)));
	});
});

describe('the columns of the mean', () => {
	const cases: [string, Partial<AnalysisPlan>, Partial<Mean>, string[], number[]][] = [
		[
			'linear with groups',
			{},
			{},
			['intercept', 'time', 'group 1', 'time × group 1'],
			[1, 4, 1, 4]
		],
		['no group', { group: null }, {}, ['intercept', 'time'], [1, 4]],
		['no time', {}, { time: 'none' }, ['intercept', 'group 1'], [1, 1]],
		['parallel groups', {}, { groupByTime: false }, ['intercept', 'time', 'group 1'], [1, 4, 1]],
		[
			'a common baseline',
			{},
			{ commonBaseline: true },
			['intercept', 'time', 'time × group 1'],
			[1, 4, 4]
		],
		[
			'a knot',
			{},
			{ time: { knots: [1.5] } },
			[
				'intercept',
				'time',
				'time after 1.5',
				'group 1',
				'time × group 1',
				'time after 1.5 × group 1'
			],
			[1, 4, 2.5, 1, 4, 2.5]
		],
		[
			'visits as categories',
			{},
			{ time: 'categorical' },
			[
				'intercept',
				'visit mid',
				'visit end',
				'group 1',
				'visit mid × group 1',
				'visit end × group 1'
			],
			[1, 0, 1, 1, 0, 1]
		],
		[
			'visits with a common baseline',
			{},
			{ time: 'categorical', commonBaseline: true },
			['intercept', 'visit mid', 'visit end', 'visit mid × group 1', 'visit end × group 1'],
			[1, 0, 1, 0, 1]
		],
		[
			'covariates',
			{},
			{
				covariates: [
					{ name: 'bmi', kind: 'numeric' },
					{ name: 'site', kind: 'categorical' }
				]
			},
			['intercept', 'time', 'group 1', 'time × group 1', 'bmi', 'site S', 'site T'],
			[1, 4, 1, 4, 18, 1, 0]
		],
		[
			'levels in the order given',
			{},
			{ covariates: [{ name: 'site', kind: 'categorical', levels: ['S', 'T', 'N'] }] },
			['intercept', 'time', 'group 1', 'time × group 1', 'site T', 'site N'],
			[1, 4, 1, 4, 0, 0]
		]
	];
	test.each(cases)('%s', (_, change, mean, names, eleventh) => {
		const built = build(change, mean);
		expect(built.design.names).toEqual(names);
		expect(rowOfX(built, 11)).toEqual(eleventh);
		expect(built.ownScale).toBeNull();
		expect(built.design.aliased).toEqual([]);
	});

	test('a knot before time 0 still lets groups with a common baseline start equal', () => {
		const built = build({}, { time: { knots: [-1] }, commonBaseline: true });
		const column = built.columns.names.indexOf('time after -1 × group 1');
		expect(column).toBe(4);
		for (const row of [0, 5, 10]) expect(study.when![row]).toBe(0);
		const alias = built.design.aliased.map((a) => a.name);
		expect(alias).toEqual(['time after -1', 'time after -1 × group 1']);
	});

	test('groups are in the order given, when one is', () => {
		const { design } = buildModelDesign(study, planWith(), { groupLevels: ['1', '0'] });
		expect(design.groups).toEqual(['1', '0']);
		expect(design.names).toContain('time × group 0');
		expect([...design.subjectGroup]).toEqual([0, 1, 0, 1, 0]);
		expect(() => buildModelDesign(study, planWith(), { groupLevels: ['1', '2'] })).toThrow(
			/“arm” in row 2 is “0”, which is not among the levels of the group/
		);
	});

	test('numbers as levels are sorted as numbers', () => {
		const dose = Array.from(study.who!, (_, i) => [10, 9, 2][i % 3]!);
		const built = build(
			{ group: null },
			{ covariates: [{ name: 'dose', kind: 'categorical' }] },
			{ ...study, dose }
		);
		expect(built.design.names).toEqual(['intercept', 'time', 'dose 9', 'dose 10']);
	});
});

describe('a polynomial', () => {
	const days = (origin: number): Columns => ({
		...study,
		when: Array.from(study.who!, (_, i) => origin + ((i * 7) % 13) / 6)
	});
	const plan = { group: null, visit: null };

	test.each([2, 3, 5])(
		'of degree %i is centred inside, and T brings back plain powers',
		(degree) => {
			const data = days(-1);
			const { design, ownScale } = build(plan, { time: { degree } }, data);
			const { n, p } = design;
			expect(p).toBe(degree + 1);
			// Any plain polynomial is X γ with own coefficients T γ.
			const gamma = design.names.map((_, j) => 1 / (j + 1));
			const own = design.names.map((_, i) =>
				gamma.reduce((sum, g, j) => sum + ownScale!.matrix[i * p + j]! * g, 0)
			);
			for (let i = 0; i < n; i++) {
				const inside = gamma.reduce((sum, g, j) => sum + g * design.x[j * n + i]!, 0);
				const outside = own.reduce((sum, b, j) => sum + b * design.time[i]! ** j, 0);
				expect(outside).toBeCloseTo(inside, 10);
			}
		}
	);

	test('of degree 6 counted from the year 0 keeps its rank', () => {
		const { design, ownScale } = build(plan, { time: { degree: 6 } }, days(2025));
		expect(design.names).toEqual([
			'intercept',
			'time',
			'time squared',
			'time cubed',
			'time to the power 4',
			'time to the power 5',
			'time to the power 6'
		]);
		// Half the range is 1 here, so the powers inside have leading coefficient 1.
		expect(ownScale!.logDeterminant).toBeCloseTo(0, 12);
	});

	test('of more powers than there are times loses the highest, named with what determines them', () => {
		const { design, ownScale } = build({ group: null }, { time: { degree: 3 } });
		expect(design.names).toEqual(['intercept', 'time', 'time squared']);
		expect(design.aliased).toEqual([{ name: 'time cubed', by: ['time'] }]);
		expect(ownScale!.matrix).toHaveLength(9);
	});

	test('with a common baseline vanishes for the groups at time 0', () => {
		const { design } = build({}, { time: { degree: 2 }, commonBaseline: true });
		const at = design.names.indexOf('time squared × group 1');
		expect(design.names).not.toContain('group 1');
		for (let i = 0; i < design.n; i++)
			if (design.time[i] === 0) expect(Math.abs(design.x[at * design.n + i]!)).toBe(0);
	});
});

describe('the baseline as a covariate', () => {
	const covariates: Mean['covariates'] = [{ kind: 'baseline' }];

	test('is the outcome at the first visit, whose rows leave the outcomes', () => {
		const built = build({}, { covariates });
		expect(built.baseline).toEqual({ at: 'visit start', rows: 6 });
		expect(built.counts).toMatchObject({ baselineRows: 6, observations: 7, droppedOutcomes: 1 });
		expect(built.design.names.at(-1)).toBe('baseline');
		expect(rowOfX(built, 12)).toEqual([1, 4, 1, 4, 9]);
		expect(built.design.visits).toEqual(['mid', 'end']);
	});

	test('is the outcome at time 0 when no visits are named; a subject without one is left out', () => {
		const y = Array.from(study.y!, (v, i) => (i === 0 ? null : v));
		const built = build({ visit: null }, { covariates }, { ...study, y });
		expect(built.baseline).toEqual({ at: 'time 0', rows: 5 });
		expect(built.dropped).toEqual([
			{ reason: 'outcome', variable: 'y', rows: 2 },
			{ reason: 'value', variable: 'baseline', rows: 1 }
		]);
	});

	test('is a logarithm on a log scale', () => {
		const built = build({ scale: 'log' }, { covariates });
		expect(rowOfX(built, 12).at(-1)).toBe(Math.log(9));
		expect(built.design.y[built.design.rowOf.indexOf(12)]).toBe(Math.log(9.5));
	});
});

describe('aliased terms', () => {
	test('are all named with what determines them and left out of X', () => {
		const data: Columns = {
			...study,
			twice: Array.from(study.bmi!, (b) => (b === null ? null : 2 * Number(b) + 1)),
			place: Array.from(study.site!, (s) => `in ${s}`)
		};
		const { design } = build(
			{ visit: null },
			{
				covariates: [
					{ name: 'bmi', kind: 'numeric' },
					{ name: 'twice', kind: 'numeric' },
					{ name: 'site', kind: 'categorical' },
					{ name: 'place', kind: 'categorical' }
				]
			},
			{
				...data,
				y: Array.from(study.y!, (v) => v ?? 3),
				bmi: Array.from(study.bmi!, (v) => v ?? 30)
			}
		);
		expect(design.aliased).toEqual([
			{ name: 'twice', by: ['intercept', 'bmi'] },
			{ name: 'place in S', by: ['site S'] },
			{ name: 'place in T', by: ['site T'] }
		]);
		expect(design.names).toEqual([
			'intercept',
			'time',
			'group 1',
			'time × group 1',
			'bmi',
			'site S',
			'site T'
		]);
		expect(design.x).toHaveLength(design.n * design.p);
	});

	test('a visit one group never had is named as such', () => {
		const y = Array.from(study.y!, (v, i) =>
			study.visit![i] === 'mid' && study.arm![i] === 1 ? null : v
		);
		const { design } = build({}, { time: 'categorical' }, { ...study, y });
		expect(design.aliased).toEqual([{ name: 'visit mid × group 1', by: [] }]);
	});
});

describe('refusals', () => {
	const set = (name: string, row: number, value: unknown): Columns => ({
		...study,
		[name]: Array.from(study[name]!, (v, i) => (i === row ? value : v)) as Column
	});
	const all = (name: string, value: unknown): Columns => ({
		...study,
		[name]: Array.from(study.who!, () => value) as Column
	});
	const bmi: Partial<Mean> = { covariates: [{ name: 'bmi', kind: 'numeric' }] };
	const site = (levels?: string[]): Partial<Mean> => ({
		covariates: [{ name: 'site', kind: 'categorical', levels }]
	});
	const serial = (along: 'time' | 'visit'): Partial<AnalysisPlan> => ({
		errors: { structure: 'serial', along, varianceBy: 'none' }
	});
	const empty: Columns = Object.fromEntries(Object.keys(study).map((name) => [name, []]));
	const cases: [string, Columns, Partial<AnalysisPlan>, Partial<Mean>, RegExp][] = [
		['no-data', empty, {}, {}, /no rows/],
		['no-data', {}, {}, {}, /no rows/],
		['no-data', all('y', null), {}, {}, /None of the 14 rows/],
		['shape-mismatch', { ...study, y: [1] }, {}, {}, /“y” has 1 rows and “who” has 14/],
		['unknown-column', study, { outcome: 'weight' }, {}, /outcome from a column “weight”.*“y”/],
		['not-finite', set('y', 3, NaN), {}, {}, /“y” in row 4 is NaN/],
		['not-finite', set('when', 0, -Infinity), {}, {}, /“when” in row 1 is -Infinity/],
		['not-finite', set('bmi', 2, Infinity), {}, bmi, /“bmi” in row 3 is Infinity/],
		['not-finite', set('arm', 2, NaN), {}, {}, /“arm” in row 3 is NaN/],
		['not-finite', { ...study, y: new Float64Array(14).fill(NaN) }, {}, {}, /row 1 is NaN/],
		['wrong-kind', set('bmi', 2, 'tall'), {}, bmi, /“bmi” in row 3 is “tall”/],
		['wrong-kind', set('arm', 2, true), {}, {}, /“arm” in row 3 is neither/],
		['missing-subject', set('who', 4, null), {}, {}, /Row 5 has no subject/],
		['not-positive', set('y', 3, 0), { scale: 'log' }, {}, /“y” in row 4 is 0/],
		['unknown-level', study, {}, site(['S', 'T']), /“site” in row 6 is “N”/],
		['empty-level', study, {}, site(['S', 'T', 'N', 'Q']), /level “Q” of “site”/],
		['duplicate-name', study, {}, site(['S', 'T', 'N', 'S']), /“S” twice/],
		['single-level', all('arm', 0), {}, {}, /only one level of the group.*“0”/],
		['single-level', all('site', 'S'), {}, site(), /only one level of “site”/],
		['group-changes', set('arm', 4, 1), {}, {}, /Subject “a” is in the group “0” and, in row 5/],
		[
			'duplicate-name',
			{ ...study, time: study.bmi! },
			{},
			{ covariates: [{ name: 'time', kind: 'numeric' }] },
			/called “time”/
		],
		['constant-outcome', all('y', 4), {}, {}, /Every usable outcome.* is 4/],
		[
			'too-few-observations',
			Object.fromEntries(Object.entries(study).map(([k, v]) => [k, Array.from(v).slice(0, 4)])),
			{},
			{ time: 'categorical' },
			/4 usable rows cannot carry 4 coefficients/
		],
		[
			'repeated-occasion',
			set('when', 1, 2),
			serial('time'),
			{},
			/“a” has two outcomes at the time 2.*rows 2 and 5/
		],
		[
			'repeated-occasion',
			set('visit', 1, 'mid'),
			serial('visit'),
			{},
			/“a” has two.*visit “mid”.*rows 2 and 5/
		],
		[
			'repeated-occasion',
			set('visit', 4, 'start'),
			{},
			{ covariates: [{ kind: 'baseline' }] },
			/“a” has two outcomes at visit start/
		],
		[
			'no-data',
			{ ...study, when: Array.from(study.when!, (t) => Number(t) + 1) },
			{ visit: null },
			{ covariates: [{ kind: 'baseline' }] },
			/No row has an outcome at time 0/
		]
	];
	test.each(cases)('%s: case %#', (code, data, change, mean, sentence) => {
		let thrown: unknown;
		try {
			build(change, mean, data);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).message).toMatch(sentence);
		expect((thrown as StatsError).code).toBe(code);
	});

	test.each(['toeplitz', 'unstructured', 'serial-with-noise'] as const)(
		'two rows at one visit are refused with %s errors along visits',
		(structure) => {
			const errors = { structure, along: 'visit', varianceBy: 'none' } as const;
			expect(() => build({ subjectEffects: 'none', errors }, {}, set('visit', 1, 'mid'))).toThrow(
				new RegExp(`“a” has two outcomes at the visit “mid”.*${structure} errors allow one`)
			);
		}
	);

	test('a column used for two things is counted as missing once', () => {
		const data = set('when', 1, null);
		expect(build({ visit: 'when' }, {}, data).dropped).toEqual([
			{ reason: 'outcome', variable: 'y', rows: 1 },
			{ reason: 'value', variable: 'when', rows: 1 },
			{ reason: 'value', variable: 'arm', rows: 1 }
		]);
	});

	test('two rows at one time are fine where the errors allow them', () => {
		const errors = { structure: 'serial-with-noise', along: 'time', varianceBy: 'none' } as const;
		expect(build({ errors }, {}, set('when', 1, 2)).counts.observations).toBe(12);
		expect(build({}, {}, set('when', 1, 2)).counts.observations).toBe(12);
	});
});

describe('properties', () => {
	const n = 14;
	const shuffled = (order: readonly number[], rename: (label: string) => string): Columns =>
		Object.fromEntries(
			Object.entries(study).map(([name, column]) => [
				name,
				order.map((i) => (name === 'who' ? rename(String(column[i])) : column[i]!))
			])
		) as Columns;

	test('permuting rows and relabelling subjects gives the same rows in another order', () => {
		const mean: Partial<Mean> = { covariates: [{ name: 'bmi', kind: 'numeric' }] };
		const whole = build({}, mean);
		fc.assert(
			fc.property(fc.shuffledSubarray([...Array(n).keys()], { minLength: n }), (order) => {
				const again = build(
					{},
					mean,
					shuffled(order, (label) => `subject ${label}!`)
				);
				expect(again.counts).toEqual(whole.counts);
				expect(again.design.names).toEqual(whole.design.names);
				order.forEach((original, row) => {
					if (!whole.design.rowOf.includes(original)) return;
					expect(rowOfX(again, row)).toEqual(rowOfX(whole, original));
				});
				again.design.subjects.forEach((label, s) => {
					const times = again.design.time.subarray(
						again.design.subjectStart[s],
						again.design.subjectStart[s + 1]
					);
					expect([...times]).toEqual([...times].sort((a, b) => a - b));
					const before = whole.design.subjects.indexOf(label.slice(8, -1));
					expect(again.design.subjectGroup[s]).toBe(whole.design.subjectGroup[before]);
				});
			}),
			{ numRuns: 50, seed: 11 }
		);
	});

	test('shifting a covariate changes its own column only, and no verdict on rank', () => {
		const mean: Partial<Mean> = { covariates: [{ name: 'bmi', kind: 'numeric' }] };
		const whole = build({}, mean);
		fc.assert(
			fc.property(fc.double({ min: -1e7, max: 1e7, noNaN: true }), (shift) => {
				const bmi = Array.from(study.bmi!, (v) => (v === null ? null : Number(v) + shift));
				const { design } = build({}, mean, { ...study, bmi });
				expect(design.aliased).toEqual([]);
				const before = 4 * design.n;
				expect(design.x.subarray(0, before)).toEqual(whole.design.x.subarray(0, before));
			}),
			{ numRuns: 50, seed: 12 }
		);
	});
});
