import fc from 'fast-check';
import { expect, test } from 'vitest';
import { findRoot, minimise } from './minimise.js';

test('minimise finds the bottom of a lopsided valley wherever it lies', () => {
	fc.assert(
		fc.property(fc.double({ min: 0.1, max: 9.9, noNaN: true }), (bottom) => {
			const found = minimise((x) => x / bottom - Math.log(x), 0.01, 10);
			expect(Math.abs(found.x - bottom)).toBeLessThan(1e-5);
			expect(found.evaluations).toBeLessThan(80);
		})
	);
});

test('minimise goes to the end when the function only falls', () => {
	expect(minimise((x) => -x, 0, 3).x).toBeCloseTo(3, 6);
	expect(minimise((x) => x, 0, 3).x).toBeCloseTo(0, 6);
});

test('minimise ends on a flat function', () => {
	expect(minimise(() => 7, 0, 1)).toMatchObject({ value: 7 });
});

test('findRoot solves x³ = c on either side of zero', () => {
	fc.assert(
		fc.property(fc.double({ min: -100, max: 100, noNaN: true }), (c) => {
			expect(findRoot((x) => x ** 3 - c, -6, 6)).toBeCloseTo(Math.cbrt(c), 3);
		})
	);
	expect(findRoot((x) => Math.exp(x) - 1e6, 0, 700)).toBeCloseTo(Math.log(1e6), 8);
});

test('findRoot refuses ends on one side', () => {
	expect(() => findRoot((x) => x * x + 1, -1, 1)).toThrow(RangeError);
});
