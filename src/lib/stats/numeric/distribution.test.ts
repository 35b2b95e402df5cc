import { describe, expect, test } from 'vitest';
import { expectRelative } from '../reference/close.js';
import {
	chiSquareQuantile,
	normalQuantile,
	studentQuantile,
	studentTwoSidedP
} from './distribution.js';
import { incompleteBeta } from './incomplete-beta.js';

/** Expected: mpmath 1.3.0 (Python 3.11) at 40 digits, `betainc(..., regularized=True)` and `findroot` on it. */
describe('Student’s t against mpmath', () => {
	test.each([
		[2.510519648877008, 79, 0.01409745067469147, 1e-12],
		[48.819468783, 108, 1.955074861761304e-75, 1e-12],
		[0.001, 3.5, 0.9992564554718668, 1e-12],
		[1e8, 10, 2.460937499999989e-76, 1e-12],
		[1.96, 100000, 0.04999856319430163, 1e-9],
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
		[0.95, 100000, 1.95998770753461, 1e-9],
		[0.95, 1000000, 1.959966356814107, 1e-9]
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

test('normal and chi-squared quantiles against printed tables (Abramowitz & Stegun 26.2, 26.8)', () => {
	expectRelative(normalQuantile(0.975), 1.959963984540054, 1e-12);
	expectRelative(chiSquareQuantile(0.95, 1), 3.841458820694124, 1e-9);
});
