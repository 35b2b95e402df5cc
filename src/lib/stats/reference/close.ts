import { expect } from 'vitest';

/** For tests only: |actual − expected| ≤ tolerance · |expected|. */
export function expectRelative(
	actual: number,
	expected: number,
	tolerance: number,
	what = ''
): void {
	expectWithin(actual, expected, tolerance * Math.abs(expected), what);
}

/** For tests only: |actual − expected| ≤ tolerance; NaN is never within. */
export function expectWithin(
	actual: number,
	expected: number,
	tolerance: number,
	what = ''
): void {
	const apart = Math.abs(actual - expected);
	expect(
		apart <= tolerance,
		`${what} ${actual} is ${apart} from ${expected}, allowed ${tolerance}`
	).toBe(true);
}
