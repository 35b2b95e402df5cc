import { Matrix } from 'ml-matrix';
import type { OrthonormalBasis } from './orthonormal.js';

/** Below this share of its square a pivot leaves too few digits, and the careful way is taken. */
const SAFE_PIVOT = 1e-5;

/** Upper R with R'R = the Gram matrix (p × p, its lower half), or null when a pivot is too small a share of its own. */
function upperFactor(gram: Float64Array, p: number, safe: number): Float64Array | null {
	const r = new Float64Array(p * p);
	for (let j = 0; j < p; j++) {
		for (let i = 0; i <= j; i++) {
			let sum = gram[j * p + i]!;
			for (let k = 0; k < i; k++) sum -= r[k * p + i]! * r[k * p + j]!;
			if (i < j) r[i * p + j] = sum / r[i * p + i]!;
			else {
				if (!(sum > safe * gram[j * p + j]!) || !Number.isFinite(sum)) return null;
				r[j * p + j] = Math.sqrt(sum);
			}
		}
	}
	return r;
}

/** Rows of q (column-major) times R⁻¹ in place; the Gram matrix of the result in its lower half. */
function divideRows(
	q: Float64Array,
	n: number,
	p: number,
	r: Float64Array,
	gram: Float64Array
): void {
	const row = new Float64Array(p);
	const by = Float64Array.from({ length: p }, (_, j) => 1 / r[j * p + j]!);
	for (let i = 0; i < n; i++) {
		for (let j = 0; j < p; j++) {
			let v = q[j * n + i]!;
			for (let k = 0; k < j; k++) v -= row[k]! * r[k * p + j]!;
			v *= by[j]!;
			row[j] = v;
			q[j * n + i] = v;
			for (let k = 0; k <= j; k++) gram[j * p + k]! += v * row[k]!;
		}
	}
}

/**
 * An orthonormal basis of many rows in three passes, or null when the columns are too close to each other for that.
 *
 * X = QR with R from the Cholesky factor of X'X, done twice: for well separated columns Q is orthonormal to rounding.
 * Source: Yamamoto, Nakatsukasa, Yanagisawa & Fukaya (2015), Electronic Trans. Numer. Anal. 44:306-326 (“CholeskyQR2”).
 */
export function orthonormaliseByRows(
	x: Float64Array,
	n: number,
	p: number
): OrthonormalBasis | null {
	const first = new Float64Array(p * p);
	for (let j = 0; j < p; j++)
		for (let k = 0; k <= j; k++) {
			let sum = 0;
			const [a, b] = [j * n, k * n];
			for (let i = 0; i < n; i++) sum += x[a + i]! * x[b + i]!;
			first[j * p + k] = sum;
		}
	const r1 = upperFactor(first, p, SAFE_PIVOT);
	if (!r1) return null;
	const q = x.slice();
	const second = new Float64Array(p * p);
	divideRows(q, n, p, r1, second);
	const r2 = upperFactor(second, p, 0.5);
	if (!r2) return null;
	divideRows(q, n, p, r2, new Float64Array(p * p));
	const r = Matrix.zeros(p, p);
	for (let i = 0; i < p; i++)
		for (let j = i; j < p; j++) {
			let sum = 0;
			for (let k = i; k <= j; k++) sum += r2[i * p + k]! * r1[k * p + j]!;
			r.set(i, j, sum);
		}
	return { n, p, q, r };
}
