import { describe, expect, test } from 'vitest';
import { StatsError, analyseGrowth, type GrowthRow, type GrowthSpec } from '../index.js';
import { expectRelative, expectWithin } from '../reference/close.js';

const rough = (s: number, v: number) => Math.sin(13 * s + 7 * v * v);
const make = (subjects: number, visits: number, outcome: (s: number, v: number) => number) =>
	Array.from({ length: subjects }, (_, s) =>
		Array.from({ length: visits }, (_, v): GrowthRow => {
			const time = v + (visits === 1 ? s : 0);
			return {
				subject: `s${s}`,
				time,
				outcome: outcome(s, v),
				group: s % 2 ? 'b' : 'a',
				covariates: { twice: 2 * time + 1, none: 0, bmi: 20 + rough(s, 3), site: `x${s % 3}` }
			};
		})
	).flat();
const rows = make(9, 4, rough);
const change = (at: number, part: Partial<GrowthRow>) =>
	rows.map((r, i) => (i === at ? { ...r, ...part } : r));
const numeric = (name: string): GrowthSpec => ({ covariates: [{ name, kind: 'numeric' }] });

describe('a growth model is refused with a whole sentence', () => {
	const cases: [string, readonly GrowthRow[], GrowthSpec, RegExp][] = [
		['no-data', [], {}, /no rows/],
		['no-data', rows.map((r) => ({ ...r, outcome: null })), {}, /None of the 36 rows/],
		['not-finite', change(3, { outcome: NaN }), {}, /“outcome” in row 4 is NaN/],
		['not-finite', change(0, { time: -Infinity }), {}, /“time” in row 1 is -Infinity/],
		[
			'not-finite',
			change(2, { covariates: { bmi: Infinity } }),
			numeric('bmi'),
			/“bmi” in row 3 is Infinity/
		],
		['wrong-kind', change(2, { covariates: { bmi: 'tall' } }), numeric('bmi'), /“bmi” in row 3/],
		['wrong-kind', change(2, { time: null as never }), {}, /time of row 3 is not a number/],
		['wrong-kind', change(2, { outcome: '5' as never }), {}, /outcome of row 3 is not a number/],
		['unknown-level', change(0, { group: 'cat' }), { group: { levels: ['a', 'b'] } }, /“cat”/],
		['group-changes', change(0, { group: 'b' }), { group: {} }, /Subject “s0” is in the group/],
		['empty-level', rows, { group: { levels: ['a', 'b', 'none'] } }, /“none”/],
		['single-level', rows.filter((r) => r.group === 'a'), { group: {} }, /one level/],
		['duplicate-name', rows, { group: { levels: ['a', 'b', 'a'] } }, /twice/],
		[
			'duplicate-name',
			rows.map((r) => ({ ...r, covariates: { time: 1 } })),
			numeric('time'),
			/called “time”/
		],
		['constant-outcome', rows.map((r) => ({ ...r, outcome: 4 })), {}, /is 4/],
		['rank-deficient', rows, numeric('twice'), /“twice” is determined by “intercept”, “time”/],
		['rank-deficient', rows, numeric('none'), /“none” is zero in every usable row/],
		['rank-deficient', rows.map((r) => ({ ...r, time: 3 })), {}, /“time” is determined by/],
		['one-observation-per-subject', make(9, 1, rough), {}, /seen once/],
		['too-few-subjects', make(1, 9, rough), {}, /One subject/],
		['too-few-observations', make(1, 2, rough), {}, /at least 3/],
		['perfect-fit', make(5, 4, (s, v) => 1e6 + 3 * v), {}, /reproduces every outcome/],
		['no-residual-variation', make(5, 4, (s, v) => 3 * v + rough(s, 0)), {}, /explain/],
		['out-of-range', make(5, 4, (s, v) => 1e-200 * rough(s, v)), {}, /unit/]
	];
	test.each(cases)('%s: case %#', (code, data, spec, sentence) => {
		let thrown: unknown;
		try {
			analyseGrowth(data, spec);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).code).toBe(code);
		expect((thrown as StatsError).message).toMatch(sentence);
	});
});

describe('edges of a growth model', () => {
	test('one observation per subject is no obstacle without the offset', () => {
		const { converged, varianceComponents } = analyseGrowth(
			make(9, 1, rough),
			{},
			{ randomIntercept: false }
		);
		expect(converged).toBe(true);
		expect(varianceComponents.map((v) => v.name)).toEqual(['residual']);
	});

	test('at zero variance the likelihood is that of independent rows, one parameter more is counted', () => {
		const flat = make(8, 4, (s, v) => 10 + v + (v % 2 ? -1 : 1) * (2 + s / 3));
		for (const method of ['REML', 'ML'] as const) {
			const fit = analyseGrowth(flat, { group: {} }, { method });
			const plain = analyseGrowth(flat, { group: {} }, { method, randomIntercept: false });
			expect(fit.boundary).toBe(true);
			expect(fit.varianceComponents[0]!.estimate).toBe(0);
			expectWithin(fit.logLikelihood, plain.logLikelihood, 1e-9);
			expect(fit.criteria.parameters).toBe(plain.criteria.parameters + 1);
		}
		for (const degreesOfFreedom of ['kenward-roger', 'satterthwaite', 'naive'] as const) {
			const { coefficients } = analyseGrowth(flat, { group: {} }, { degreesOfFreedom });
			expectRelative(coefficients[1]!.df, 32 - 4, 1e-9, degreesOfFreedom);
		}
	});

	test('a covariate may be called as our own columns are', () => {
		const named = rows.map((r) => ({
			...r,
			covariates: { outcome: r.covariates!.bmi!, group: 'q' }
		}));
		const { coefficients } = analyseGrowth(named, {
			group: {},
			covariates: [{ name: 'outcome', kind: 'numeric' }]
		});
		const plain = analyseGrowth(rows, { group: {}, ...numeric('bmi') });
		expect(coefficients.map((c) => c.name)).toContain('outcome');
		expect(coefficients.map((c) => c.estimate)).toEqual(plain.coefficients.map((c) => c.estimate));
	});

	test('effective sample size: N n / (1 + (n − 1) ICC), Kish (1965)', () => {
		const whole = analyseGrowth(
			make(30, 4, (s, v) => rough(s, 0) + rough(s, v)),
			{}
		);
		const icc = whole.icc!.estimate;
		expect(icc).toBeGreaterThan(0.1);
		expectRelative(whole.effectiveSampleSize.forMean, 120 / (1 + 3 * icc), 1e-8);
		expectRelative(whole.effectiveSampleSize.designEffect, 1 + 3 * icc, 1e-8);
	});
});
