import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import type { Columns } from '../design/columns.js';
import { StatsError, type StatsErrorCode } from '../errors.js';
import { randomStream } from '../numeric/random.js';
import { readPlan } from '../read-plan.js';
import { expectRelative } from '../reference/close.js';
import { analyse } from './analyse.js';
import type { AnalysisResult } from './result.js';

/** `subjects` × `visits`, two arms, drawn with a level and a slope of each subject. */
function drawn(subjects: number, visits: number, seed = 1): Columns & { y: Float64Array } {
	const random = randomStream(seed);
	const columns = {
		id: [] as string[],
		t: [] as number[],
		visit: [] as number[],
		arm: [] as string[],
		y: [] as number[]
	};
	for (let s = 0; s < subjects; s++) {
		const level = 3 * random.normal();
		const slope = 0.5 * random.normal();
		for (let v = 0; v < visits; v++) {
			columns.id.push(`S${s}`);
			columns.t.push(v + 0.1 * random.uniform());
			columns.visit.push(v);
			columns.arm.push(s % 2 ? 'b' : 'a');
			columns.y.push(50 + level + (1 + slope) * v + random.normal());
		}
	}
	return { ...columns, t: Float64Array.from(columns.t), y: Float64Array.from(columns.y) };
}

const planOf = (change: object = {}) =>
	readPlan({ outcome: 'y', subject: 'id', time: 't', visit: 'visit', ...change });

const models: [string, object][] = [
	['independent', { subjectEffects: 'none' }],
	['level', {}],
	['level and slope', { subjectEffects: 'level-and-slope' }],
	['serial', { subjectEffects: 'none', errors: { structure: 'serial' } }],
	['level and serial', { errors: { structure: 'serial' } }],
	['level and visit', { visitEffects: true }],
	['unstructured', { subjectEffects: 'none', errors: { structure: 'unstructured' } }],
	['compound symmetry', { subjectEffects: 'none', errors: { structure: 'compound-symmetry' } }],
	[
		'Toeplitz by visit',
		{ subjectEffects: 'none', errors: { structure: 'toeplitz', varianceBy: 'visit' } }
	],
	['categorical visits', { mean: { time: 'categorical' } }],
	['a curve of degree 6', { mean: { time: { degree: 6 } } }]
];

const rest = (data: Columns, change: Columns): Columns => ({ ...data, ...change });
const constant = drawn(6, 4);
const cases: [string, Columns][] = [
	['one row', drawn(1, 1)],
	['one subject', drawn(1, 12)],
	['one row a subject', drawn(12, 1)],
	['two occasions', drawn(8, 2)],
	['two subjects', drawn(2, 3)],
	['a constant outcome', rest(constant, { y: new Float64Array(24).fill(3) })],
	[
		'a perfect line',
		rest(constant, { y: Float64Array.from(constant.t as Float64Array, (t) => 2 * t) })
	],
	['an outcome of NaN', rest(constant, { y: new Float64Array(24).fill(NaN) })],
	['outcomes near the largest number', rest(constant, { y: constant.y.map((v) => v * 1e300) })],
	['outcomes near the smallest number', rest(constant, { y: constant.y.map((v) => v * 1e-300) })],
	[
		'times near the largest number',
		rest(constant, { t: (constant.t as Float64Array).map((t) => t * 1e300) })
	],
	['all at one time', rest(constant, { t: new Float64Array(24).fill(7) })],
	['nobody twice at a visit', rest(constant, { visit: Array.from(constant.id!, (_, i) => i) })]
];

function everyNumber(value: unknown, path = ''): [string, number][] {
	if (typeof value === 'number') return [[path, value]];
	if (typeof value !== 'object' || value === null) return [];
	return Object.entries(value).flatMap(([key, part]) => everyNumber(part, `${path}.${key}`));
}

describe.each(cases)('%s', (_, data) => {
	test.each(models)('%s: a refusal with a sentence, or numbers that are numbers', (__, change) => {
		let result: AnalysisResult;
		try {
			result = analyse(data, planOf({ ...change, degreesOfFreedom: 'satterthwaite' }));
		} catch (error) {
			expect(error).toBeInstanceOf(StatsError);
			expect((error as StatsError).message).toMatch(/^.{20,}\.$/);
			return;
		}
		for (const [path, number] of everyNumber(result))
			expect(number, path).toSatisfy(Number.isFinite);
		for (const c of result.coefficients) expect([c.estimate, c.se, c.df, c.p]).not.toContain(null);
	});
});

describe('what is refused, by its code', () => {
	const codes: [StatsErrorCode, Columns, object][] = [
		['one-observation-per-subject', drawn(12, 1), {}],
		['too-few-subjects', drawn(1, 12), {}],
		['constant-outcome', cases[5]![1], {}],
		['perfect-fit', cases[6]![1], {}],
		['not-finite', cases[7]![1], {}],
		['too-few-observations', drawn(1, 1), { subjectEffects: 'none' }]
	];
	test.each(codes)('%s', (code, data, change) => {
		expect(() => analyse(data, planOf(change))).toThrow(expect.objectContaining({ code }));
	});
});

test('a single subject with serial errors, and single rows with independent ones, are fitted', () => {
	const plan = planOf({ subjectEffects: 'none', errors: { structure: 'serial' } });
	expect(analyse(drawn(1, 40), plan).converged).toBe(true);
	expect(analyse(drawn(12, 1), planOf({ subjectEffects: 'none' })).observations).toBe(12);
});

test('a variance estimated at zero is flagged and explained', () => {
	const random = randomStream(5);
	const data = drawn(10, 4);
	// Each subject's outcomes sum to the same, so that levels differ less than chance would make them.
	const y = data.y.map(() => random.normal());
	for (let s = 0; s < 10; s++) {
		const own = y.subarray(4 * s, 4 * s + 4);
		const mean = own.reduce((a, b) => a + b, 0) / 4;
		own.forEach((v, i) => (own[i] = v - mean));
	}
	const result = analyse({ ...data, y }, planOf());
	expect(result.converged).toBe(true);
	expect(result.boundary).toEqual(['subject level']);
	expect(result.warnings[0]).toMatch(/levels is estimated as zero/);
	expect(result.icc!.estimate).toBe(0);
});

describe('columns on wildly different scales', () => {
	const data = drawn(30, 5);
	const change = { group: 'arm', subjectEffects: 'level-and-slope' };
	const whole = analyse(data, planOf(change));

	test('time from another origin and in other units, outcomes in other units: the same tests', () => {
		fc.assert(
			fc.property(
				fc.constantFrom(-1e4, 0, 3, 2e4),
				fc.constantFrom(1e-6, 1, 31_556_952_000),
				fc.constantFrom(1e-6, 1, 1e6),
				(origin, unit, size) => {
					const moved = analyse(
						{
							...data,
							t: (data.t as Float64Array).map((t) => (t + origin) * unit),
							y: data.y.map((v) => v * size)
						},
						planOf(change)
					);
					for (const name of ['time', 'time × group b']) {
						const before = whole.coefficients.find((c) => c.name === name)!;
						const after = moved.coefficients.find((c) => c.name === name)!;
						expectRelative((after.estimate * unit) / size, before.estimate, 1e-5, name);
						expectRelative((after.se * unit) / size, before.se, 1e-5, name);
						expectRelative(after.df, before.df, 1e-4, name);
						expectRelative(after.p, before.p, 1e-4, name);
					}
				}
			),
			{ numRuns: 36, seed: 31 }
		);
	});
});
