import { describe, expect, test } from 'vitest';
import { expectRelative } from '../reference/close.js';
import {
	chiSquareAreas,
	chiSquareQuantile,
	chiSquareUpperQuantile,
	fAbove,
	fBelow,
	fUpperQuantile,
	normalAbove,
	normalBelow,
	normalDensity,
	normalQuantile,
	normalUpperQuantile,
	studentAbove,
	studentQuantile,
	studentTwoSidedP,
	studentUpperQuantile
} from './distribution.js';
import { incompleteBeta } from './incomplete-beta.js';

/** Expected: mpmath 1.3.0 (Python 3.11) at 40 digits, `betainc(..., regularized=True)` and `findroot` on it. */
describe('Student’s t against mpmath', () => {
	test.each([
		[2.510519648877008, 79, 0.01409745067469147, 1e-12],
		[48.819468783, 108, 1.955074861761304e-75, 1e-12],
		[0.001, 3.5, 0.9992564554718668, 1e-12],
		[1e8, 10, 2.460937499999989e-76, 1e-12],
		[1.96, 100000, 0.04999856319430164, 1e-12],
		[1.96, 1e6, 0.04999606758526979, 1e-12],
		[5, 1e7, 5.733128075008539e-7, 1e-12],
		[5, 1.25, 0.08921392695131809, 1e-12]
	])('the area beyond ±%d on %d df', (t, df, p, tolerance) => {
		expectRelative(studentTwoSidedP(t, df), p, tolerance);
		expectRelative(studentTwoSidedP(-t, df), p, tolerance);
	});

	test('an area below the smallest number is 0, never negative or NaN', () => {
		// mpmath: 1.19e-333.
		expect(studentTwoSidedP(60, 1000)).toBe(0);
		expect(studentTwoSidedP(1e300, 3)).toBe(0);
		expect(studentTwoSidedP(0, 5)).toBe(1);
	});

	test.each([
		[0.95, 79, 1.990450210230129, 1e-12],
		[0.95, 37.137301818526346, 2.025939632217694, 1e-12],
		[0.99, 1.5, 17.82031051446281, 1e-12],
		[0.5, 4, 0.7406970841126826, 1e-12],
		[0.95, 100000, 1.9599877075346093, 1e-13],
		[0.95, 1000000, 1.9599663568141068, 1e-13],
		[0.95, 0.5, 164.55767348048823, 1e-12]
	])('the quantile that leaves %d between on %d df', (confidence, df, t, tolerance) => {
		expectRelative(studentQuantile(confidence, df), t, tolerance);
	});

	test('the quantile undoes the area over very small and very large df', () => {
		for (const df of [0.3, 1, 2.2, 12, 400, 1e5])
			for (const confidence of [0.2, 0.8, 0.95, 0.999])
				expectRelative(
					studentTwoSidedP(studentQuantile(confidence, df), df),
					1 - confidence,
					1e-9,
					`df ${df}`
				);
	});
});

test.each([
	[0.3, 0.7, 2.5, 0.5, 0.01892712407194565],
	[0.999, 0.001, 40, 0.5, 0.7779198676356882],
	[0.7, 0.3, 3, 7, 0.995709106]
])('incompleteBeta(%d, %d, %d, %d) against mpmath', (x, complement, a, b, expected) => {
	expectRelative(incompleteBeta(x, complement, a, b), expected, 1e-12);
});

/** mpmath 1.3.0 at 60 digits: `erfc`, `gammainc`, `betainc` and `findroot` on their logarithms. */
describe('the normal distribution against mpmath', () => {
	test.each([
		[0, 0.5],
		[0.1, 0.460172162722971],
		[0.6744, 0.2500285213729406],
		[0.68, 0.2482522304535705],
		[1, 0.15865525393145705],
		[3.3, 0.0004834241423837775],
		[5.6, 1.071759025831093e-8],
		[5.7, 5.990371401063528e-9],
		[8.3, 5.205569744890254e-17],
		[12, 1.776482112077679e-33],
		[20, 2.7536241186062337e-89],
		[30, 4.906713927148187e-198],
		[-1, 0.8413447460685429],
		[-6, 0.9999999990134123]
	])('the area above %d', (z, area) => {
		expectRelative(normalAbove(z), area, 2e-15);
		expect(normalBelow(-z)).toBe(normalAbove(z));
	});

	test.each([
		[1e-300, 37.0470962993612],
		[1e-100, 21.273453560965326],
		[1e-20, 9.262340089798407],
		[1e-6, 4.753424308822899],
		[0.025, 1.9599639845400543],
		[0.2, 0.8416212335729142],
		[0.4999, 0.00025066283008800747],
		[0.49999999999, 2.506628482030354e-11],
		[0.5000001, -2.506628273311648e-7],
		[0.9, -1.2815515655446006]
	])('the quantile above which %d lies', (tail, z) => {
		expectRelative(normalUpperQuantile(tail), z, 2e-15);
		expect(normalQuantile(tail)).toBe(-normalUpperQuantile(tail));
	});

	test('the area’s own slope is the density, and the ends are said', () => {
		for (const z of [-3, -0.4, 0, 1.7, 9]) {
			const step = 1e-5;
			const slope = (normalAbove(z - step) - normalAbove(z + step)) / (2 * step);
			expectRelative(slope, normalDensity(z), 1e-7);
		}
		expect([normalUpperQuantile(0), normalUpperQuantile(1)]).toEqual([Infinity, -Infinity]);
		expect([normalAbove(Infinity), normalAbove(-Infinity)]).toEqual([0, 1]);
		expect(normalUpperQuantile(1.5)).toBeNaN();
	});
});

describe('chi-squared and F against mpmath', () => {
	test.each([
		[3.841458820694124, 1, 0.05000000000000006, 0.95],
		[1e-10, 1, 0.9999920211543921, 7.978845607895674e-6],
		[60, 3, 5.878230727906912e-13, 0.9999999999994121],
		[1400, 2, 9.85967654375977e-305, 1],
		[10500, 10000, 0.00024794736798936087, 0.9997520526320106],
		[0.5, 7.3, 0.9996366322967627, 0.000363367703237283],
		[1e6, 1e6, 0.4998119368033945, 0.5001880631966055]
	])('areas of chi-squared at %d on %d df', (x, df, above, below) => {
		const areas = chiSquareAreas(x, df);
		expectRelative(areas.above, above, 1e-12);
		expectRelative(areas.below, below, 1e-12);
	});

	test.each([
		[0.05, 1, 3.841458820694126],
		[1e-12, 2, 55.262042231857095],
		[0.01, 1e4, 10331.933577929449],
		[1e-200, 5, 938.9258262373493]
	])('the chi-squared above which %d lies on %d df', (tail, df, x) => {
		expectRelative(chiSquareUpperQuantile(tail, df), x, 1e-13);
	});

	test.each([
		[1e-8, 1, 1.5707963267948967e-16],
		[0.025, 3, 0.21579528262389788],
		[1e-6, 200, 118.87264139624578]
	])('the chi-squared below which %d lies on %d df', (probability, df, x) => {
		expectRelative(chiSquareQuantile(probability, df), x, 1e-13);
	});

	test.each([
		[3.2, 3, 24.5, 0.04096426860364688, 0.9590357313963531],
		[1e-4, 2, 30, 0.9999000053331318, 9.99946668681421e-5],
		[50, 1, 12, 1.2988840130430134e-5, 0.9999870111598695],
		[1.1, 4000, 900, 0.036157789798098354, 0.9638422102019016],
		[400, 8, 60, 4.586371694490988e-49, 1]
	])('areas of F at %d on %d and %d df', (f, df1, df2, above, below) => {
		expectRelative(fAbove(f, df1, df2), above, 1e-12);
		expectRelative(fBelow(f, df1, df2), below, 1e-12);
	});

	test.each([
		[0.05, 3, 24.5, 2.999819295146982],
		[1e-10, 2, 30, 54.62383250419168],
		[0.975, 4, 7, 0.11020326820103767],
		[0.01, 1, 1.5, 317.56346683187365]
	])('the F above which %d lies on %d and %d df', (tail, df1, df2, f) => {
		expectRelative(fUpperQuantile(tail, df1, df2), f, 1e-13);
	});

	test('the square of t is F on one degree of freedom, a t far out has its normal’s sign', () => {
		expectRelative(fAbove(2.5 ** 2, 1, 79), 0.014490566652902484, 1e-13);
		expectRelative(studentAbove(2.5, 79), 0.014490566652902484 / 2, 1e-13);
		expectRelative(studentAbove(-2.5, 79), 1 - 0.014490566652902484 / 2, 1e-13);
		expectRelative(studentUpperQuantile(0.975, 4), -studentUpperQuantile(0.025, 4), 1e-13);
		expectRelative(studentAbove(studentUpperQuantile(1e-250, 2.2), 2.2), 1e-250, 1e-11);
	});
});
