import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import { inner, invertPositive } from '../numeric/dense.js';
import { incompleteBeta } from '../numeric/incomplete-beta.js';
import type { CurvatureSums } from './curvature-sums.js';

/** A joint test that every row of weights times the coefficients is zero. */
export interface JointTest {
	numeratorDf: number;
	denominatorDf: number;
	/** By which the Wald statistic is multiplied; 1 except for Kenward–Roger. */
	scaling: number;
	f: number;
	p: number;
}

/** P(F > f) for Fisher's F with `a` and `b` degrees of freedom. */
export function fisherTail(f: number, a: number, b: number): number {
	if (!(f > 0)) return 1;
	const share = b / (b + a * f);
	return incompleteBeta(share, (a * f) / (b + a * f), b / 2, a / 2);
}

const dot = (a: ArrayLike<number>, b: ArrayLike<number>) => {
	let sum = 0;
	for (let i = 0; i < a.length; i++) sum += a[i]! * b[i]!;
	return sum;
};

function dependentRows(): never {
	throw new StatsError(
		'bad-option',
		'The rows of the joint test determine one another; leave out those that follow from the others.'
	);
}

/** e'V⁻¹e. */
export function waldOf(e: readonly number[], v: Float64Array): number {
	const q = e.length;
	const found = invertPositive(v, q);
	if (!found) return dependentRows();
	let sum = 0;
	for (let i = 0; i < q; i++)
		for (let j = 0; j < q; j++) sum += e[i]! * found.inverse[i * q + j]! * e[j]!;
	return sum;
}

/** Independent single rows by the eigenvectors of the covariance, their degrees of freedom put together. */
export function jointSatterthwaite(
	estimate: readonly number[],
	w: readonly Float64Array[],
	v: Float64Array,
	singleDf: (w: Float64Array) => number
): JointTest {
	const q = estimate.length;
	const wald = waldOf(estimate, v);
	const m = new Matrix(q, q);
	for (let i = 0; i < q; i++) for (let j = 0; j < q; j++) m.set(i, j, v[i * q + j]!);
	const { eigenvectorMatrix: vectors } = new EigenvalueDecomposition(m, { assumeSymmetric: true });
	const dfs = Array.from({ length: q }, (_, k) => {
		const row = new Float64Array(w[0]!.length);
		for (let i = 0; i < q; i++)
			for (let j = 0; j < row.length; j++) row[j]! += vectors.get(i, k) * w[i]![j]!;
		return singleDf(row);
	});
	const f = wald / q;
	const low = Math.min(...dfs);
	const high = Math.max(...dfs);
	let df: number;
	if (high - low < 1e-8 * high) df = high;
	else if (low <= 2) df = 2;
	else {
		const e = dfs.reduce((sum, d) => sum + d / (d - 2), 0);
		df = (2 * e) / (e - q);
	}
	return { numeratorDf: q, denominatorDf: df, scaling: 1, f, p: fisherTail(f, q, df) };
}

/** Source: Kenward & Roger (1997), section 3, in the form of their equations for λ and m. */
export function jointKenwardRoger(
	estimate: readonly number[],
	w: readonly Float64Array[],
	adjusted: Float64Array,
	sums: CurvatureSums,
	spread: Float64Array
): JointTest {
	const q = estimate.length;
	const { p, count } = sums;
	const c = p + 1;
	const gram = new Float64Array(q * q);
	w.forEach((a, i) => w.forEach((b, j) => (gram[i * q + j] = dot(a, b))));
	const found = invertPositive(gram, q);
	if (!found) return dependentRows();
	// G⁻¹ W F_k W' for each parameter: q × q.
	const m = Array.from({ length: count }, (_, k) => {
		const inside = new Float64Array(q * q);
		w.forEach((a, i) =>
			w.forEach((b, j) => {
				for (let h = 0; h < p; h++)
					for (let g = 0; g < p; g++)
						inside[i * q + j]! += a[h]! * sums.first[k]![h * c + g]! * b[g]!;
			})
		);
		const out = new Float64Array(q * q);
		for (let i = 0; i < q; i++)
			for (let j = 0; j < q; j++)
				for (let h = 0; h < q; h++)
					out[i * q + j]! += found.inverse[i * q + h]! * inside[h * q + j]!;
		return out;
	});
	const trace = (a: Float64Array) => {
		let sum = 0;
		for (let i = 0; i < q; i++) sum += a[i * q + i]!;
		return sum;
	};
	const transpose = (a: Float64Array) => {
		const t = new Float64Array(q * q);
		for (let i = 0; i < q; i++) for (let j = 0; j < q; j++) t[j * q + i] = a[i * q + j]!;
		return t;
	};
	let a1 = 0;
	let a2 = 0;
	for (let k = 0; k < count; k++)
		for (let l = 0; l < count; l++) {
			a1 += spread[k * count + l]! * trace(m[k]!) * trace(m[l]!);
			a2 += spread[k * count + l]! * inner(m[k]!, transpose(m[l]!));
		}
	const b = (a1 + 6 * a2) / (2 * q);
	const g = ((q + 1) * a1 - (q + 4) * a2) / ((q + 2) * a2);
	const d = 3 * q + 2 * (1 - g);
	const e = 1 / (1 - a2 / q);
	const v =
		((2 / q) * (1 + (g / d) * b)) / ((1 - ((q - g) / d) * b) ** 2 * (1 - ((q + 2 - g) / d) * b));
	const rho = v / (2 * e * e);
	const df = 4 + (q + 2) / (q * rho - 1);
	const scaling = df / (e * (df - 2));
	if (!Number.isFinite(scaling) || !(df > 0) || !(scaling > 0)) {
		throw new StatsError(
			'singular-information',
			'The data are too few for the Kenward–Roger degrees of freedom of this joint test.'
		);
	}
	const f = (scaling / q) * waldOf(estimate, adjusted);
	return { numeratorDf: q, denominatorDf: df, scaling, f, p: fisherTail(f, q, df) };
}
