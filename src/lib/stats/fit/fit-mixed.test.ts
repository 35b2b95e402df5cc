import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { buildDesign } from '../design/design.js';
import { StatsError } from '../errors.js';
import { precisionRule } from '../inference/degrees-of-freedom.js';
import { testContrast } from '../inference/contrast.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import type { GrowthRow } from '../types.js';
import { crossProducts } from './cross-products.js';
import { denseDeviance } from './dense.js';
import { fitMixed } from './fit-mixed.js';
import { atRatio, deviance, profileDeviance, profileSlope } from './objective.js';
import { searchRatio } from './search.js';

/** Five to nine subjects with one to five rows each, in two groups; offsets from nothing to large. */
const unbalanced = fc.integer({ min: 1, max: 1e6 }).map((seed) => {
	// A small congruential generator (Numerical Recipes, 2nd ed., 7.1): all a test needs.
	let state = seed;
	const random = () => (state = (state * 1664525 + 1013904223) % 2 ** 32) / 2 ** 32;
	const rows: GrowthRow[] = [];
	const spread = 4 * random() ** 2;
	const subjects = 5 + Math.floor(5 * random());
	for (let s = 0; s < subjects; s++) {
		const offset = spread * (random() - 0.5);
		const visits = s < 3 ? 3 : 1 + Math.floor(5 * random());
		for (let v = 0; v < visits; v++)
			rows.push({
				subject: `s${s}`,
				time: v + random() / 4,
				outcome: offset + random() + random(),
				group: s % 2 ? 'b' : 'a'
			});
	}
	return rows;
});

const methods = ['REML', 'ML'] as const;

describe.each(methods)('the likelihood by %s', (method) => {
	test('is that of the full covariance matrix, at any variances', () => {
		fc.assert(
			fc.property(
				unbalanced,
				fc.double({ min: 0, max: 20, noNaN: true }),
				fc.double({ min: 0.1, max: 20, noNaN: true }),
				(rows, subject, residual) => {
					const design = buildDesign(rows, { group: {} });
					const at = atRatio(crossProducts(design), method, subject / residual);
					expectWithin(
						deviance(at, residual),
						denseDeviance(design, method, subject, residual),
						1e-8 * (1 + at.weightedSquares / residual)
					);
				}
			),
			{ numRuns: 40, seed: 41 }
		);
	});

	test('has the slope and curvature that finite differences show', () => {
		fc.assert(
			fc.property(unbalanced, fc.double({ min: 0.05, max: 5, noNaN: true }), (rows, ratio) => {
				const products = crossProducts(buildDesign(rows, { group: {} }));
				const f = (x: number) => profileDeviance(atRatio(products, method, x));
				const g = (x: number) => profileSlope(products, method, atRatio(products, method, x));
				const h = 1e-4 * ratio;
				const { first, second } = g(ratio);
				const scale = 1 / ratio;
				expectWithin(first, (f(ratio + h) - f(ratio - h)) / (2 * h), 1e-5 * scale);
				expectWithin(
					second,
					(g(ratio + h).first - g(ratio - h).first) / (2 * h),
					1e-5 * scale * scale
				);
			}),
			{ numRuns: 40, seed: 42 }
		);
	});

	test('is nowhere lower on a fine grid than where the search ends', () => {
		fc.assert(
			fc.property(unbalanced, (rows) => {
				const products = crossProducts(buildDesign(rows, { group: {} }));
				const found = searchRatio(products, method);
				const lowest = profileDeviance(found.at);
				for (let x = 0; x < 12; x += 0.01)
					expect(profileDeviance(atRatio(products, method, Math.expm1(x)))).toBeGreaterThan(
						lowest - 1e-8
					);
				expect(found.converged).toBe(true);
				expect(found.boundary).toBe(found.at.ratio === 0);
			}),
			{ numRuns: 30, seed: 43 }
		);
	});
});

describe('on the boundary', () => {
	// Within each subject the ups and downs cancel: subjects are more alike than chance makes them.
	const rows = Array.from({ length: 8 }, (_, s) =>
		[0, 1, 2, 3].map((v): GrowthRow => ({
			subject: `s${s}`,
			time: v,
			outcome: 10 + v + (v % 2 ? -1 : 1) * (2 + s / 3),
			group: s % 2 ? 'b' : 'a'
		}))
	).flat();
	const design = buildDesign(rows, { group: {} });

	test.each(methods)(
		'%s ends at zero, converged, flagged, with the likelihood of independent rows',
		(method) => {
			const fit = fitMixed(design, { method, randomIntercept: true });
			const independent = fitMixed(design, { method, randomIntercept: false });
			expect(fit).toMatchObject({ boundary: true, converged: true, gradient: 0 });
			expect(fit.varianceComponents.subject).toBe(0);
			expect(independent.boundary).toBe(false);
			expectWithin(fit.logLikelihood, independent.logLikelihood, 1e-12);
			// One parameter more was estimated, and is counted.
			expect(fit.criteria.parameters).toBe(independent.criteria.parameters + 1);
			expectWithin(fit.criteria.aic, independent.criteria.aic + 2, 1e-9);
		}
	);

	test('degrees of freedom are those of the model without the offset: rows − coefficients', () => {
		const fit = fitMixed(design, { method: 'REML', randomIntercept: true });
		for (const kind of ['kenward-roger', 'satterthwaite', 'naive'] as const) {
			const { df, standardError } = testContrast(fit, precisionRule(fit, kind), [0, 1, 0, 0], 0.95);
			expectRelative(df, 32 - 4, 1e-10, kind);
			expectRelative(standardError, fit.se[1]!, 1e-10, kind);
		}
	});
});

describe('refusals', () => {
	const make = (subjects: number, visits: number, outcome: (s: number, v: number) => number) =>
		Array.from({ length: subjects }, (_, s) =>
			Array.from({ length: visits }, (_, v): GrowthRow => ({
				subject: `s${s}`,
				time: v + (visits === 1 ? s : 0),
				outcome: outcome(s, v),
				group: s % 2 ? 'b' : 'a',
				covariates: { twice: 2 * (v + (visits === 1 ? s : 0)) + 1, none: 0 }
			}))
		).flat();
	const rough = (s: number, v: number) => Math.sin(13 * s + 7 * v * v);

	const cases: [string, GrowthRow[], Parameters<typeof buildDesign>[1], RegExp][] = [
		[
			'rank-deficient',
			make(5, 4, rough),
			{ covariates: [{ name: 'twice', kind: 'numeric' }] },
			/“twice” is determined by “intercept”, “time”/
		],
		[
			'rank-deficient',
			make(5, 4, rough),
			{ covariates: [{ name: 'none', kind: 'numeric' }] },
			/“none” is zero in every usable row/
		],
		[
			'rank-deficient',
			make(5, 4, rough).map((r) => ({ ...r, time: 3 })),
			{},
			/“time” is determined by “intercept”/
		],
		['one-observation-per-subject', make(9, 1, rough), {}, /seen once/],
		['too-few-subjects', make(1, 9, rough), {}, /1 subject cannot carry 1 coefficient/],
		[
			'too-few-subjects',
			make(2, 9, rough),
			{ group: {} },
			/2 subjects cannot carry 2 coefficients/
		],
		[
			'too-few-observations',
			[...make(4, 1, rough), { subject: 's0', time: 9, outcome: 2 }],
			{},
			/at least 6 rows/
		],
		['perfect-fit', make(5, 4, (s, v) => 1e6 + 3 * v), {}, /reproduces every outcome/],
		['no-residual-variation', make(5, 4, (s, v) => 3 * v + rough(s, 0)), {}, /Within subjects/]
	];
	test.each(cases)('%s: case %#', (code, rows, spec, sentence) => {
		let thrown: unknown;
		try {
			fitMixed(buildDesign(rows, spec), { method: 'REML', randomIntercept: true });
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).code).toBe(code);
		expect((thrown as StatsError).message).toMatch(sentence);
	});

	test('one observation per subject is no obstacle without the offset', () => {
		const fit = fitMixed(buildDesign(make(9, 1, rough), {}), {
			method: 'REML',
			randomIntercept: false
		});
		expect(fit.converged).toBe(true);
		expect(fit.varianceComponents.subject).toBeNull();
	});

	test.each([1e200, 1e-200])('outcomes of the size %d are refused, never NaN', (size) => {
		const design = buildDesign(
			make(5, 4, (s, v) => size * rough(s, v)),
			{}
		);
		expect(() => fitMixed(design, { method: 'REML', randomIntercept: true })).toThrow(
			expect.objectContaining({ code: 'out-of-range' })
		);
	});

	test('stops when asked and says how far it is', () => {
		const design = buildDesign(make(5, 4, rough), {});
		let asked = 0;
		const stop = () =>
			fitMixed(design, { method: 'REML', randomIntercept: true, shouldStop: () => ++asked > 3 });
		expect(stop).toThrow(expect.objectContaining({ code: 'stopped' }));
		const told: number[] = [];
		fitMixed(design, {
			method: 'REML',
			randomIntercept: true,
			onProgress: (fraction) => told.push(fraction)
		});
		expect(told).toEqual([...told].sort((a, b) => a - b));
		expect(told.at(-1)).toBe(1);
	});
});
