import type { Layout } from './layout.js';

/** Correlations by lag from partial autocorrelations (each within ±1), and their slopes in them. */
export function lagCorrelations(partial: ArrayLike<number>): {
	/** correlation[0] = 1, then lag 1, 2 …: K long for K − 1 partials. */
	correlation: Float64Array;
	/** ∂ correlation[i] / ∂ partial[j]: K × (K − 1). */
	slope: Float64Array;
} {
	const k = partial.length;
	const correlation = new Float64Array(k + 1);
	correlation[0] = 1;
	const slope = new Float64Array((k + 1) * Math.max(1, k));
	// Coefficients of the best linear prediction from the last `lag` values, and their slopes.
	let a = new Float64Array(k + 1);
	let da = new Float64Array((k + 1) * k);
	let v = 1;
	const dv = new Float64Array(k);
	for (let lag = 1; lag <= k; lag++) {
		const p = partial[lag - 1]!;
		let r = p * v;
		for (let j = 1; j < lag; j++) r += a[j]! * correlation[lag - j]!;
		correlation[lag] = r;
		for (let d = 0; d < k; d++) {
			let s = p * dv[d]! + (d === lag - 1 ? v : 0);
			for (let j = 1; j < lag; j++)
				s += da[j * k + d]! * correlation[lag - j]! + a[j]! * slope[(lag - j) * k + d]!;
			slope[lag * k + d] = s;
		}
		const next = a.slice();
		const dnext = da.slice();
		next[lag] = p;
		dnext[lag * k + lag - 1] = 1;
		for (let j = 1; j < lag; j++) {
			next[j] = a[j]! - p * a[lag - j]!;
			for (let d = 0; d < k; d++)
				dnext[j * k + d] =
					da[j * k + d]! - p * da[(lag - j) * k + d]! - (d === lag - 1 ? a[lag - j]! : 0);
		}
		for (let d = 0; d < k; d++) dv[d] = dv[d]! * (1 - p * p) - (d === lag - 1 ? 2 * p * v : 0);
		v *= 1 - p * p;
		a = next;
		da = dnext;
	}
	return { correlation, slope };
}

/** The lower factor of an unstructured covariance: its first entry is 1, the others are the parameters, by row. */
export function unstructuredFactor(layout: Layout, x: Float64Array): Float64Array {
	const k = layout.positions;
	const l = new Float64Array(k * k);
	l[0] = 1;
	let at = layout.shape;
	for (let i = 1; i < k; i++) for (let j = 0; j <= i; j++) l[i * k + j] = x[at++]!;
	return l;
}

/** The lowest correlation all of whose compound-symmetric matrices (up to the most rows met) stay positive. */
export const lowestCommonCorrelation = (layout: Layout): number =>
	layout.mostPerSubject > 1 ? -1 / (layout.mostPerSubject - 1) : 0;

/** Compound symmetry: the common correlation, and its slope in the working parameter. */
export function commonCorrelation(layout: Layout, x: Float64Array): { rho: number; slope: number } {
	const low = lowestCommonCorrelation(layout);
	const share = 1 / (1 + Math.exp(-x[layout.shape]!));
	return { rho: low + (1 - low) * share, slope: (1 - low) * share * (1 - share) };
}

/** Leftover correlation over positions (K × K) for Toeplitz or compound symmetry. */
export function shapeCorrelation(layout: Layout, x: Float64Array): Float64Array {
	const k = layout.positions;
	const r = new Float64Array(k * k);
	if (layout.dependence.errors.structure === 'toeplitz') {
		const { correlation } = lagCorrelations(
			Array.from({ length: k - 1 }, (_, i) => Math.tanh(x[layout.shape + i]!))
		);
		for (let i = 0; i < k; i++)
			for (let j = 0; j < k; j++) r[i * k + j] = correlation[Math.abs(i - j)]!;
	} else {
		const { rho } = commonCorrelation(layout, x);
		for (let i = 0; i < k; i++) for (let j = 0; j < k; j++) r[i * k + j] = i === j ? 1 : rho;
	}
	return r;
}
