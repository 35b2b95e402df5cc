import { CholeskyDecomposition, Matrix } from 'ml-matrix';

/** A positive definite matrix, factored: what the likelihood needs of it. */
export interface Factored {
	inverse: Matrix;
	/** Natural logarithm of the determinant. */
	logDeterminant: number;
}

/**
 * Inverse and log-determinant of a symmetric positive definite `a` (p × p), or null when it is not.
 *
 * The diagonal is scaled to one first, so that columns on very different scales cost no digits.
 */
export function factorise(a: Matrix): Factored | null {
	const p = a.rows;
	const scale: number[] = [];
	for (let i = 0; i < p; i++) {
		const d = a.get(i, i);
		if (!(d > 0) || !Number.isFinite(d)) return null;
		scale.push(1 / Math.sqrt(d));
	}
	const scaled = new Matrix(p, p);
	for (let i = 0; i < p; i++)
		for (let j = 0; j <= i; j++) {
			const v = a.get(i, j) * scale[i]! * scale[j]!;
			scaled.set(i, j, v);
			scaled.set(j, i, v);
		}
	const cholesky = new CholeskyDecomposition(scaled);
	if (!cholesky.isPositiveDefinite()) return null;
	const inverse = symmetric(cholesky.solve(Matrix.eye(p)));
	let logDeterminant = 0;
	for (let i = 0; i < p; i++) {
		logDeterminant += 2 * Math.log(cholesky.lowerTriangularMatrix.get(i, i) / scale[i]!);
		for (let j = 0; j < p; j++) inverse.set(i, j, inverse.get(i, j) * scale[i]! * scale[j]!);
	}
	return { inverse, logDeterminant };
}

/** The mean of a square matrix and its transpose: rounding leaves products slightly lopsided. */
export function symmetric(a: Matrix): Matrix {
	const result = a.clone();
	for (let i = 0; i < a.rows; i++)
		for (let j = 0; j < i; j++) {
			const v = (a.get(i, j) + a.get(j, i)) / 2;
			result.set(i, j, v);
			result.set(j, i, v);
		}
	return result;
}

/** x'Ay for a matrix A (p × p) and vectors of length p. */
export function form(x: ArrayLike<number>, a: Matrix, y: ArrayLike<number> = x): number {
	let sum = 0;
	for (let i = 0; i < a.rows; i++) {
		let row = 0;
		for (let j = 0; j < a.columns; j++) row += a.get(i, j) * y[j]!;
		sum += x[i]! * row;
	}
	return sum;
}

/** Ay, as a plain array. */
export function times(a: Matrix, y: ArrayLike<number>): number[] {
	const result: number[] = [];
	for (let i = 0; i < a.rows; i++) {
		let row = 0;
		for (let j = 0; j < a.columns; j++) row += a.get(i, j) * y[j]!;
		result.push(row);
	}
	return result;
}

/** The trace of AB for square A and B of one size, without forming the product. */
export function traceOfProduct(a: Matrix, b: Matrix): number {
	let sum = 0;
	for (let i = 0; i < a.rows; i++)
		for (let j = 0; j < a.columns; j++) sum += a.get(i, j) * b.get(j, i);
	return sum;
}
