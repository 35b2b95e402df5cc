import { describe, expect, test } from 'vitest';
import { StatsError } from '../errors.js';
import type { GrowthRow, GrowthSpec } from '../types.js';
import { buildDesign } from './design.js';

const rows: GrowthRow[] = [
	{ subject: 'a', time: 0, outcome: 5, group: 'boy', covariates: { bmi: 20, site: 'Tarnbeck' } },
	{ subject: 'a', time: 2, outcome: null, group: 'boy', covariates: { bmi: 20, site: 'Tarnbeck' } },
	{ subject: 'a', time: 4, outcome: 7, group: 'boy', covariates: { bmi: 21, site: 'Tarnbeck' } },
	{ subject: 'b', time: 1, outcome: 4, group: 'girl', covariates: { bmi: 18, site: 'Saltreach' } },
	{ subject: 'b', time: 3, outcome: 6, group: 'girl', covariates: { bmi: null, site: null } },
	{ subject: 'b', time: 5, outcome: 8, group: 'girl', covariates: { bmi: 19, site: 'Northmoor' } },
	{ subject: 'c', time: 0, outcome: 3, group: null, covariates: { bmi: 22, site: 'Northmoor' } },
	{ subject: 'd', time: 1, outcome: 6, group: 'boy', covariates: { bmi: 17, site: 'Northmoor' } },
	{ subject: 'd', time: 2, outcome: 9, group: 'boy', covariates: { bmi: 16, site: 'Saltreach' } },
	{ subject: 'd', time: 7, outcome: 2, group: 'boy', covariates: { bmi: 15, site: 'Saltreach' } },
	{ subject: 'e', time: 7, outcome: 1, group: 'girl', covariates: { bmi: 15, site: 'Tarnbeck' } },
	{ subject: 'e', time: 8, outcome: 2, group: 'girl', covariates: { bmi: 14, site: 'Tarnbeck' } }
];
const spec: GrowthSpec = {
	group: { levels: ['boy', 'girl'] },
	covariates: [
		{ name: 'bmi', kind: 'numeric' },
		{ name: 'site', kind: 'categorical', levels: ['Northmoor', 'Saltreach', 'Tarnbeck'] }
	]
};

const row = (design: ReturnType<typeof buildDesign>, i: number) =>
	design.names.map((_, j) => design.x[j * design.n + i]);

describe('the design matrix', () => {
	const design = buildDesign(rows, spec);

	test('has a named column for each term, in a fixed order', () => {
		expect(design.names).toEqual([
			'intercept',
			'time',
			'group[girl]',
			'time:group[girl]',
			'bmi',
			'site[Saltreach]',
			'site[Tarnbeck]'
		]);
	});

	test('codes groups and categories against their first level', () => {
		expect(row(design, 1)).toEqual([1, 4, 0, 0, 21, 0, 1]);
		expect(row(design, 2)).toEqual([1, 1, 1, 1, 18, 1, 0]);
		expect(row(design, 3)).toEqual([1, 5, 1, 5, 19, 0, 0]);
	});

	test('drops a missing outcome by occasion and a missing value by row, and counts both', () => {
		expect(design.counts).toEqual({
			rows: 12,
			observations: 9,
			subjects: 4,
			droppedSubjects: 1,
			droppedOutcomes: 1,
			droppedRows: 2,
			missingByVariable: [
				{ name: 'group', rows: 1 },
				{ name: 'bmi', rows: 1 },
				{ name: 'site', rows: 1 }
			],
			fewestPerSubject: 2,
			mostPerSubject: 3
		});
		expect(design.subjects).toEqual(['a', 'b', 'd', 'e']);
		expect([...design.subject]).toEqual([0, 0, 1, 1, 2, 2, 2, 3, 3]);
		expect([...design.subjectGroup]).toEqual([0, 1, 0, 1]);
		expect([...design.y]).toEqual([5, 7, 4, 8, 6, 9, 2, 1, 2]);
	});

	test('reads no group and no covariate that the plan does not name', () => {
		const plain = buildDesign(rows, {});
		expect(plain.names).toEqual(['intercept', 'time']);
		expect(plain.counts).toMatchObject({ observations: 11, droppedOutcomes: 1, droppedRows: 0 });
		expect(buildDesign(rows, { ...spec, groupByTime: false }).names).not.toContain(
			'time:group[girl]'
		);
	});

	test('sorts levels that are not given, and takes numbers as names of categories', () => {
		const coded = rows.map((r, i) => ({ ...r, covariates: { dose: [10, 9, 2][i % 3]! } }));
		const { names } = buildDesign(coded, { covariates: [{ name: 'dose', kind: 'categorical' }] });
		expect(names).toEqual(['intercept', 'time', 'dose[2]', 'dose[9]']);
		const swapped = buildDesign(rows, { group: { levels: ['girl', 'boy'] } });
		expect(swapped.names).toContain('time:group[boy]');
	});
});

describe('refusals', () => {
	const change = (at: number, part: Partial<GrowthRow>) =>
		rows.map((r, i) => (i === at ? { ...r, ...part } : r));
	const cases: [string, readonly GrowthRow[], GrowthSpec, RegExp][] = [
		['no-data', [], spec, /no rows/],
		['no-data', rows.map((r) => ({ ...r, outcome: null })), spec, /None of the 12 rows/],
		['not-finite', change(3, { outcome: NaN }), spec, /outcome of row 4 is NaN/],
		['not-finite', change(0, { time: -Infinity }), spec, /time of row 1 is -Infinity/],
		['not-finite', change(2, { covariates: { bmi: Infinity } }), spec, /“bmi” of row 3/],
		[
			'wrong-kind',
			change(2, { covariates: { bmi: 'tall' } }),
			spec,
			/“bmi” of row 3 is not a number/
		],
		[
			'unknown-level',
			change(0, { group: 'cat' }),
			spec,
			/“cat” is not among the levels of the group/
		],
		['group-changes', change(0, { group: 'girl' }), spec, /Subject “a” is in the group/],
		['empty-level', rows, { group: { levels: ['boy', 'girl', 'none'] } }, /level “none”/],
		['single-level', rows.filter((r) => r.group === 'boy'), { group: {} }, /only one level/],
		['duplicate-name', rows, { group: { levels: ['boy', 'girl', 'boy'] } }, /twice/],
		[
			'duplicate-name',
			rows.map((r) => ({ ...r, covariates: { time: 1 } })),
			{ covariates: [{ name: 'time', kind: 'numeric' }] },
			/called “time”/
		],
		['constant-outcome', rows.map((r) => ({ ...r, outcome: 4 })), spec, /Every outcome is 4/],
		['too-few-observations', rows.slice(0, 6), { group: {} }, /5 usable rows|4 coefficients/]
	];
	test.each(cases)('%s: case %#', (code, data, plan, sentence) => {
		let thrown: unknown;
		try {
			buildDesign(code === 'too-few-observations' ? data.slice(0, 5) : data, plan);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).code).toBe(code);
		expect((thrown as StatsError).message).toMatch(sentence);
	});
});
