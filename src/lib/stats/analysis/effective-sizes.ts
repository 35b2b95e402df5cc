import { occasionsOf, patternKey } from '../dependence/natural.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { invertPositive } from '../numeric/dense.js';
import { toBasis } from '../numeric/orthonormal.js';

/** Variance of each row's outcome given the mean; outcome unit squared, in the order of the design's rows. */
export function marginalVariances(fit: ModelFit): Float64Array {
	const { natural, scale } = fit;
	const { design, layout } = fit.prepared;
	const shared = natural.visitRatio * scale;
	const variances = new Float64Array(design.n);
	const known = new Map<string, Float64Array>();
	for (let s = 0; s < design.subjects.length; s++) {
		const occasions = occasionsOf(design, layout, s);
		const key = patternKey(layout, occasions);
		let own = known.get(key);
		if (!own) {
			const m = occasions.time.length;
			const v = natural.covariance(occasions);
			own = Float64Array.from({ length: m }, (_, i) => scale * v[i * m + i]! + shared);
			known.set(key, own);
		}
		variances.set(own, design.subjectStart[s]!);
	}
	return variances;
}

/** Q'D⁻¹Q for the orthonormal columns of a fit and a diagonal D, p × p. */
function weightedProducts(fit: ModelFit, variances: Float64Array): Float64Array {
	const { q, n, p } = fit.prepared.basis;
	const products = new Float64Array(p * p);
	for (let a = 0; a < p; a++)
		for (let b = 0; b <= a; b++) {
			let sum = 0;
			for (let i = 0; i < n; i++) sum += (q[a * n + i]! * q[b * n + i]!) / variances[i]!;
			products[a * p + b] = products[b * p + a] = sum;
		}
	return products;
}

function inverseOf(a: Float64Array, p: number): Float64Array {
	const found = invertPositive(a, p);
	if (found) return found.inverse;
	throw new StatsError(
		'out-of-range',
		'The variances differ so much between rows that no effective sample size can be computed.'
	);
}

const quadratic = (w: ArrayLike<number>, a: Float64Array, p: number) => {
	let sum = 0;
	for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) sum += w[i]! * a[i * p + j]! * w[j]!;
	return sum;
};

/** How many independent rows would tell as much. */
export interface EffectiveSizes {
	/** About the mean. */
	mean: number;
	/** About Σ weights × coefficients of the columns of X. */
	of: (weights: readonly number[]) => number;
}

/**
 * Effective sample sizes: n × (the contrast's variance were the n rows independent with the same marginal variances) ÷ (its
 * variance under the model).
 *
 * Both variances are those of generalised least squares with the estimated covariance taken as known. For the mean the
 * model has an intercept alone: n × 1'V⁻¹1 ÷ 1'D⁻¹1, which under a level is Σ n_i / (1 + (n_i − 1) ICC). A contrast within
 * subjects may exceed the rows; a visit effect shared by all may bring the mean below the subjects.
 * Needs a first column of X that is all ones. Errors: `out-of-range`.
 * Source: design effect, Kish (1965), Survey Sampling, 5.4, for the mean; the ratio of variances is its general form.
 */
export function effectiveSizes(fit: ModelFit): EffectiveSizes {
	const { basis, design } = fit.prepared;
	const { n, p } = design;
	const variances = marginalVariances(fit);
	const independent = inverseOf(weightedProducts(fit, variances), p);
	const precision = inverseOf(fit.coordinateCovariance, p);
	let weights = 0;
	for (const v of variances) weights += 1 / v;
	return {
		// The first direction of the basis is 1 / √n in every row, so that 1'V⁻¹1 is n times its precision.
		mean: (n * n * precision[0]!) / weights,
		of: (contrast) => {
			const w = toBasis(basis, contrast);
			return (n * quadratic(w, independent, p)) / quadratic(w, fit.coordinateCovariance, p);
		}
	};
}
