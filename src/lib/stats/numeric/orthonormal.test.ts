import fc from 'fast-check';
import { Matrix } from 'ml-matrix';
import { expect, test } from 'vitest';
import {
	covarianceOfCoefficients,
	orthonormalise,
	project,
	toBasis,
	toCoefficients
} from './orthonormal.js';

const columns = (...cs: number[][]) => Float64Array.from(cs.flat());

function basisOf(x: Float64Array, n: number, p: number) {
	const found = orthonormalise(x, n, p);
	if (!('basis' in found)) throw new Error('unexpectedly aliased');
	return found.basis;
}

test('X = QR with orthonormal Q, even for a column of milliseconds since 1970', () => {
	const time = [1.7e12, 1.7e12 + 86_400_000, 1.7e12 + 3 * 86_400_000, 1.7e12 + 9 * 86_400_000];
	const x = columns([1, 1, 1, 1], time, [0, 1, 0, 1]);
	const { q, r } = basisOf(x, 4, 3);
	for (let a = 0; a < 3; a++)
		for (let b = 0; b < 3; b++) {
			let dot = 0;
			for (let i = 0; i < 4; i++) dot += q[a * 4 + i]! * q[b * 4 + i]!;
			expect(dot).toBeCloseTo(a === b ? 1 : 0, 13);
		}
	for (let j = 0; j < 3; j++)
		for (let i = 0; i < 4; i++) {
			let back = 0;
			for (let k = 0; k < 3; k++) back += q[k * 4 + i]! * r.get(k, j);
			expect(Math.abs(back - x[j * 4 + i]!)).toBeLessThan(
				1e-15 * Math.abs(x[j * 4 + i]!) * 4 + 1e-15
			);
		}
});

test('Q stays orthonormal to the last digits when a column nearly repeats another', () => {
	const time = [0.1, 1.3, 2.2, 3.7, 4.9, 6.1];
	const nearly = time.map((t, i) => t + 1e-7 * Math.sin(5 * i + 1));
	const { q } = basisOf(columns([1, 1, 1, 1, 1, 1], time, nearly), 6, 3);
	for (const earlier of [0, 1]) {
		let dot = 0;
		for (let i = 0; i < 6; i++) dot += q[earlier * 6 + i]! * q[2 * 6 + i]!;
		expect(Math.abs(dot)).toBeLessThan(1e-14);
	}
});

test('the first aliased column is named with those that determine it', () => {
	const x = columns([1, 1, 1, 1], [0, 1, 2, 3], [5, 5, 0, 1], [3, 5, 7, 9]);
	expect(orthonormalise(x, 4, 4)).toEqual({ alias: { column: 3, of: [0, 1] } });
	expect(orthonormalise(columns([1, 1, 1], [4, 4, 4]), 3, 2)).toEqual({
		alias: { column: 1, of: [0] }
	});
	expect(orthonormalise(columns([1, 1, 1], [0, 0, 0]), 3, 2)).toEqual({
		alias: { column: 1, of: [] }
	});
});

test('weights and coefficients keep their product when both change basis', () => {
	const basis = basisOf(columns([1, 1, 1, 1], [2, 5, 9, 1], [0, 0, 1, 1]), 4, 3);
	const vector = fc.array(fc.double({ min: -50, max: 50, noNaN: true }), {
		minLength: 3,
		maxLength: 3
	});
	fc.assert(
		fc.property(vector, vector, (coordinates, weights) => {
			const dot = (a: number[], b: number[]) => a.reduce((s, v, i) => s + v * b[i]!, 0);
			expect(dot(toCoefficients(basis, coordinates), weights)).toBeCloseTo(
				dot(coordinates, toBasis(basis, weights)),
				6
			);
		})
	);
});

test('a covariance of identity in the basis is (X’X)⁻¹ for the coefficients', () => {
	const basis = basisOf(columns([1, 1, 1, 1], [0, 1, 2, 3]), 4, 2);
	// By hand: X'X = [4 6; 6 14], its inverse [14 −6; −6 4] / 20.
	const inverse = covarianceOfCoefficients(basis, Matrix.eye(2));
	[0.7, -0.3, -0.3, 0.2].forEach((v, i) => expect(inverse.flat()[i]).toBeCloseTo(v, 12));
});

test('what is left of y is at right angles to every column', () => {
	const basis = basisOf(columns([1, 1, 1, 1], [0, 1, 2, 3]), 4, 2);
	const { residual } = project(basis, Float64Array.from([1e9, 1e9 + 1, 1e9, 1e9 + 5]));
	// Least squares by hand for 0, 1, 0, 5: line −0.6 + 1.4 x.
	[0.6, 0.2, -2.2, 1.4].forEach((v, i) => expect(residual[i]).toBeCloseTo(v, 6));
});
