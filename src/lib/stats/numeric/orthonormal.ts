import { Matrix } from 'ml-matrix';

/** X = QR, column by column in the given order. */
export interface OrthonormalBasis {
	n: number;
	p: number;
	/** n × p, column-major, Q'Q = I; unitless. */
	q: Float64Array;
	/** p × p upper triangular with a positive diagonal; column j has the unit of column j of X. */
	r: Matrix;
}

/** Column `column` of X is the combination of earlier columns that `of` names. */
export interface Alias {
	column: number;
	of: number[];
}

/** How much of a column must be left after the earlier ones are taken out, relative to its spread. */
const RANK_TOLERANCE = 1e-9;
const SPREAD_TOLERANCE = 1e-13;

/** The largest power of two not above the largest absolute value; dividing by it costs no digits. */
function binaryScale(column: Float64Array): number {
	let largest = 0;
	for (const v of column) largest = Math.max(largest, Math.abs(v));
	return largest === 0 ? 1 : 2 ** Math.floor(Math.log2(largest));
}

/** q'v for column j of q, and v minus its share of it. */
function takeOut(q: Float64Array, j: number, v: Float64Array): number {
	const at = j * v.length;
	let dot = 0;
	for (let i = 0; i < v.length; i++) dot += q[at + i]! * v[i]!;
	for (let i = 0; i < v.length; i++) v[i]! -= dot * q[at + i]!;
	return dot;
}

function norm(v: Float64Array): number {
	let sum = 0;
	for (const x of v) sum += x * x;
	return Math.sqrt(sum);
}

/**
 * An orthonormal basis of the columns of X (n × p, column-major, n ≥ p), or the first aliased column.
 *
 * Working in Q keeps the answer the same whether time is in years or milliseconds: each column is scaled
 * by a power of two, freed from the first one (the intercept) and then from the others, twice over.
 * A column is aliased when less than 1e-9 of its spread about the first column is left.
 * Source: Björck (1967), BIT 7:1-21 (modified Gram–Schmidt); Giraud, Langou & Rozložník (2005),
 * Computers & Mathematics with Applications 50:1069-1075 (twice is enough).
 */
export function orthonormalise(
	x: Float64Array,
	n: number,
	p: number
): { basis: OrthonormalBasis } | { alias: Alias } {
	const q = new Float64Array(n * p);
	const r = Matrix.zeros(p, p);
	for (let j = 0; j < p; j++) {
		const v = x.slice(j * n, (j + 1) * n);
		const scale = binaryScale(v);
		for (let i = 0; i < n; i++) v[i]! /= scale;
		const whole = norm(v);
		const share = new Array<number>(j).fill(0);
		let spread = whole;
		for (let pass = 0; pass < 2; pass++) {
			for (let k = 0; k < j; k++) {
				share[k]! += takeOut(q, k, v);
				if (k === 0 && pass === 0) spread = norm(v);
			}
		}
		const left = norm(v);
		if (!(left > RANK_TOLERANCE * spread) || !(spread > SPREAD_TOLERANCE * whole)) {
			return { alias: { column: j, of: explainedBy(r, share, scale) } };
		}
		for (let k = 0; k < j; k++) r.set(k, j, share[k]! * scale);
		r.set(j, j, left * scale);
		for (let i = 0; i < n; i++) q[j * n + i] = v[i]! / left;
	}
	return { basis: { n, p, q, r } };
}

/** Which earlier columns take part in the combination, by their share of its size. */
function explainedBy(r: Matrix, share: readonly number[], scale: number): number[] {
	const j = share.length;
	const weights = new Array<number>(j).fill(0);
	for (let k = j - 1; k >= 0; k--) {
		let sum = share[k]! * scale;
		for (let m = k + 1; m < j; m++) sum -= r.get(k, m) * weights[m]!;
		weights[k] = sum / r.get(k, k);
	}
	const size = weights.map((w, k) => {
		let square = 0;
		for (let m = 0; m <= k; m++) square += r.get(m, k) ** 2;
		return Math.abs(w) * Math.sqrt(square);
	});
	const largest = Math.max(...size, 0);
	return size.flatMap((s, k) => (largest > 0 && s > 1e-8 * largest ? [k] : []));
}

/** R⁻¹v: from coordinates in the basis to coefficients of X. */
export function toCoefficients(basis: OrthonormalBasis, v: ArrayLike<number>): number[] {
	const { r, p } = basis;
	const result = new Array<number>(p).fill(0);
	for (let k = p - 1; k >= 0; k--) {
		let sum = v[k]!;
		for (let m = k + 1; m < p; m++) sum -= r.get(k, m) * result[m]!;
		result[k] = sum / r.get(k, k);
	}
	return result;
}

/** R⁻ᵀw: from weights on coefficients of X to weights on coordinates in the basis. */
export function toBasis(basis: OrthonormalBasis, weights: ArrayLike<number>): number[] {
	const { r, p } = basis;
	const result: number[] = [];
	for (let k = 0; k < p; k++) {
		let sum = weights[k]!;
		for (let m = 0; m < k; m++) sum -= r.get(m, k) * result[m]!;
		result.push(sum / r.get(k, k));
	}
	return result;
}

/** R⁻¹ A R⁻ᵀ: from a covariance of coordinates in the basis to one of coefficients of X. */
export function covarianceOfCoefficients(basis: OrthonormalBasis, a: Matrix): number[][] {
	const rows = a.to2DArray().map((row) => toCoefficients(basis, row));
	const result: number[][] = basis.r.to2DArray().map(() => []);
	for (let j = 0; j < basis.p; j++) {
		const column = toCoefficients(
			basis,
			rows.map((row) => row[j]!)
		);
		column.forEach((v, i) => result[i]!.push(v));
	}
	return result.map((row, i) => row.map((v, j) => (v + result[j]![i]!) / 2));
}

/** Q'v, and v minus QQ'v (the least-squares residual), for v of length n; v is left as it was. */
export function project(
	basis: OrthonormalBasis,
	v: Float64Array
): { coordinates: number[]; residual: Float64Array } {
	const residual = v.slice();
	const coordinates = new Array<number>(basis.p).fill(0);
	for (let pass = 0; pass < 2; pass++)
		for (let j = 0; j < basis.p; j++) coordinates[j]! += takeOut(basis.q, j, residual);
	return { coordinates, residual };
}
