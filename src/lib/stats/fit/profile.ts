import type { FitMethod } from '../plan.js';
import {
	block,
	choleskyInPlace,
	inverseFromFactor,
	logDeterminantOf,
	product
} from '../numeric/dense.js';

/**
 * What a kernel gives at one point of the dependence parameters, V* the covariance in units of σ² without the
 * shared visit effects: `m` = [Q r U]'V*⁻¹[Q r U], symmetric, (p + 1 + K) wide, U the K visit indicators.
 */
export interface Moments {
	m: Float64Array;
	/** log|V*|. */
	logDeterminant: number;
}

/** The likelihood with coefficients, σ² and visit effects taken care of, at one point. */
export interface Profile {
	/** −2 log-likelihood with σ² at its best. */
	deviance: number;
	/** σ², outcome unit squared. */
	scale: number;
	/** σ⁻² times the covariance of the coordinates in the basis: (Q'V*⁻¹Q)⁻¹, p × p. */
	covariance: Float64Array;
	/** [−δ, 1]: δ is what generalised least squares adds to the least-squares coordinates. */
	contrast: Float64Array;
	/** ∂ deviance / ∂ m, as wide as `m`; with ∂ deviance / ∂ log|V*| = 1. */
	slope: Float64Array;
	/** ∂ deviance / ∂ (visit variance / σ²); 0 without visit effects. */
	visitSlope: number;
	/** ∂ deviance / ∂ log σ²; 0 at the best σ². */
	scaleSlope: number;
}

export interface Sizes {
	n: number;
	p: number;
	/** Shared visit effects; 0 without them. */
	visits: number;
	/** log|X'X| on the data's own scale. */
	logDeterminantOfX: number;
}

/**
 * −2 log-likelihood from a kernel's moments, and its slope in them; null where the matrix of the mean is singular.
 *
 * REML: (n − p)(log 2πσ² + 1) + log|V*| + log|X'V*⁻¹X|, σ² = r'V*⁻¹r / (n − p); ML: n(log 2πσ² + 1) + log|V*|.
 * Visit effects of variance uσ² enter by Woodbury on the K × K matrix S = (I/u + U'V*⁻¹U)⁻¹.
 * With `fixedScale` σ² is held there, and the deviance is that of it; `scaleSlope` is its slope in log σ².
 * Source: Harville (1977), JASA 72:320-338; Woodbury's identity for the visit effects.
 */
export function profileOf(
	{ m, logDeterminant }: Moments,
	sizes: Sizes,
	method: FitMethod,
	visitRatio: number,
	fixedScale?: number
): Profile | null {
	const { n, p, visits: K } = sizes;
	const c = p + 1;
	const width = c + K;
	const mean = block(m, width, 0, c, 0, c);
	let log = logDeterminant;
	let s: Float64Array | null = null;
	let j: Float64Array | null = null;
	let au: Float64Array | null = null;
	let aus: Float64Array | null = null;
	let visitSlope = 0;
	const uu = K > 0 ? block(m, width, c, width, c, width) : null;
	if (uu) {
		const b = uu.map((v) => v * visitRatio);
		for (let i = 0; i < K; i++) b[i * K + i]! += 1;
		if (choleskyInPlace(b, K) >= 0) return null;
		log += logDeterminantOf(b, K);
		j = inverseFromFactor(b, K);
		s = j.map((v) => v * visitRatio);
		au = block(m, width, 0, c, c, width);
		aus = product(au, s, c, K, K);
		for (let a = 0; a < c; a++)
			for (let d = 0; d < c; d++) {
				let sum = 0;
				for (let k = 0; k < K; k++) sum += aus[a * K + k]! * au[d * K + k]!;
				mean[a * c + d]! -= sum;
			}
	}
	const xx = block(mean, c, 0, p, 0, p);
	if (choleskyInPlace(xx, p, 1e-12) >= 0) return null;
	const logOfX = logDeterminantOf(xx, p);
	const covariance = inverseFromFactor(xx, p);
	const contrast = new Float64Array(c);
	contrast[p] = 1;
	let squares = mean[p * c + p]!;
	for (let a = 0; a < p; a++) {
		let delta = 0;
		for (let b = 0; b < p; b++) delta += covariance[a * p + b]! * mean[b * c + p]!;
		contrast[a] = -delta;
		squares -= delta * mean[a * c + p]!;
	}
	const weight = method === 'reml' ? n - p : n;
	const scale = fixedScale ?? squares / weight;
	if (!(scale > 0) || !(squares > 0) || !Number.isFinite(scale)) return null;
	const scaleSlope = weight - squares / scale;
	let deviance = weight * Math.log(2 * Math.PI * scale) + squares / scale + log;
	if (method === 'reml') deviance += logOfX + sizes.logDeterminantOfX;
	if (!Number.isFinite(deviance)) return null;

	const h = new Float64Array(c * c);
	for (let a = 0; a < c; a++)
		for (let b = 0; b < c; b++) {
			h[a * c + b] = (contrast[a]! * contrast[b]!) / scale;
			if (method === 'reml' && a < p && b < p) h[a * c + b]! += covariance[a * p + b]!;
		}
	if (!uu) return { deviance, scale, covariance, contrast, slope: h, visitSlope, scaleSlope };
	const slope = new Float64Array(width * width);
	const hs = product(h, aus!, c, c, K);
	const auj = product(au!, j!, c, K, K);
	const hj = product(h, auj, c, c, K);
	for (let a = 0; a < c; a++) {
		for (let b = 0; b < c; b++) slope[a * width + b] = h[a * c + b]!;
		for (let k = 0; k < K; k++) {
			slope[a * width + c + k] = slope[(c + k) * width + a] = -hs[a * K + k]!;
			visitSlope -= auj[a * K + k]! * hj[a * K + k]!;
		}
	}
	for (let k = 0; k < K; k++)
		for (let l = 0; l < K; l++) {
			let sum = s![k * K + l]!;
			for (let a = 0; a < c; a++) sum += aus![a * K + k]! * hs[a * K + l]!;
			slope[(c + k) * width + c + l] = sum;
			visitSlope += j![k * K + l]! * uu[l * K + k]!;
		}
	return { deviance, scale, covariance, contrast, slope, visitSlope, scaleSlope };
}
