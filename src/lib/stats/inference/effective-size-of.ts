import { occasionsOf } from '../dependence/occasions.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { visitVarianceOf } from '../fit/subject-view.js';
import { invertPositive } from '../numeric/dense.js';
import { toBasis } from '../numeric/orthonormal.js';

/** Rows that independent outcomes with the same marginal variances would need to tell as much; unitless. */
export interface EffectiveSize {
	/** For the overall mean of the outcomes; null when the mean of the model has no constant in it. */
	forMean: number | null;
	/** For the contrast of the coefficients asked for; null when none is. */
	forContrast: number | null;
}

/** Variance of each row's outcome under the model, n long; outcome unit squared. */
export function marginalVariances(fit: ModelFit): Float64Array {
	const { design, layout } = fit.prepared;
	const shared = visitVarianceOf(fit);
	const variances = new Float64Array(design.n);
	for (let s = 0; s + 1 < design.subjectStart.length; s++) {
		const occasions = occasionsOf(design, layout, s);
		const size = occasions.time.length;
		const v = fit.natural.covariance(occasions);
		for (let i = 0; i < size; i++)
			variances[design.subjectStart[s]! + i] = v[i * size + i]! * fit.scale + shared;
	}
	return variances;
}

/**
 * n × (variance were the n rows independent with the same marginal variances) ÷ (variance under the model).
 *
 * For the mean under a lasting level it is Σ nᵢ / (1 + (nᵢ − 1) ICC); a contrast within subjects may exceed the rows,
 * and shared visit effects may bring the mean below the number of subjects. `weights`: p long, on the coefficients.
 * Errors: `shape-mismatch`, `singular-information`.
 * Source: design effect, Kish (1965), Survey Sampling, 5.4, taken from the variance of a mean to that of a contrast.
 */
export function effectiveSizeOf(fit: ModelFit, weights?: readonly number[]): EffectiveSize {
	const { rows, design, basis } = fit.prepared;
	const { n, p } = design;
	if (weights && weights.length !== p) {
		throw new StatsError(
			'shape-mismatch',
			`The contrast has ${weights.length} weights for ${p} coefficients.`,
			{ weights: weights.length, coefficients: p }
		);
	}
	const variances = marginalVariances(fit);
	const alone = new Float64Array(p * p);
	const ones = new Float64Array(p);
	let precision = 0;
	for (let i = 0; i < n; i++) {
		const at = i * rows.c;
		precision += 1 / variances[i]!;
		for (let j = 0; j < p; j++) {
			const f = rows.a[at + j]!;
			ones[j]! += f;
			for (let k = 0; k < p; k++) alone[j * p + k]! += (f * rows.a[at + k]!) / variances[i]!;
		}
	}
	const form = (m: Float64Array, w: ArrayLike<number>) => {
		let sum = 0;
		for (let j = 0; j < p; j++) for (let k = 0; k < p; k++) sum += w[j]! * m[j * p + k]! * w[k]!;
		return sum;
	};
	const information = invertPositive(fit.coordinateCovariance, p);
	const independent = invertPositive(alone, p);
	if (!information || !independent) {
		throw new StatsError(
			'singular-information',
			'The coefficients are too close to each other for an effective sample size.'
		);
	}
	let square = 0;
	for (const f of ones) square += f * f;
	// 1 lies in the mean when its projection is as long as it is.
	const constant = Math.abs(square - n) <= 1e-9 * n;
	const w = weights && toBasis(basis, weights);
	return {
		forMean: constant ? (n * form(information.inverse, ones)) / precision : null,
		forContrast: w ? (n * form(independent.inverse, w)) / form(fit.coordinateCovariance, w) : null
	};
}
