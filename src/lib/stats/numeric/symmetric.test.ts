import { Matrix } from 'ml-matrix';
import { expect, test } from 'vitest';
import { factorise, form, symmetric, times, traceOfProduct } from './symmetric.js';

test('inverse and log-determinant of a 2 × 2 matrix by hand', () => {
	const found = factorise(
		new Matrix([
			[4, 6],
			[6, 14]
		])
	)!;
	expect(found.logDeterminant).toBeCloseTo(Math.log(20), 12);
	[0.7, -0.3, -0.3, 0.2].forEach((v, i) => expect(found.inverse.to1DArray()[i]).toBeCloseTo(v, 12));
});

test('a diagonal over sixty powers of ten costs no digits', () => {
	const found = factorise(
		new Matrix([
			[1e-30, 0.5],
			[0.5, 1e30]
		])
	)!;
	expect(found.logDeterminant).toBeCloseTo(Math.log(0.75), 12);
	expect(found.inverse.get(0, 0) / (1e30 / 0.75)).toBeCloseTo(1, 12);
});

test('a matrix that is not positive definite gives null', () => {
	expect(
		factorise(
			new Matrix([
				[1, 2],
				[2, 1]
			])
		)
	).toBeNull();
	expect(factorise(new Matrix([[0]]))).toBeNull();
	expect(factorise(new Matrix([[NaN]]))).toBeNull();
});

test('forms, products and traces by hand', () => {
	const a = new Matrix([
		[1, 2],
		[3, 4]
	]);
	expect(form([1, 2], a, [3, 4])).toBe(61);
	expect(times(a, [5, 6])).toEqual([17, 39]);
	expect(
		traceOfProduct(
			a,
			new Matrix([
				[0, 1],
				[1, 0]
			])
		)
	).toBe(5);
	expect(symmetric(a).to2DArray()).toEqual([
		[1, 2.5],
		[2.5, 4]
	]);
});
