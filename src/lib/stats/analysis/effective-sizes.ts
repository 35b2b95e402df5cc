import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { invertPositive } from '../numeric/dense.js';
import { toBasis } from '../numeric/orthonormal.js';

/** By time within a class of rows: variance = level + line · s + bend · s² with s = (time − origin) / unit. */
interface VarianceByTime {
	level: number;
	line: number;
	bend: number;
}

/** The variance of one outcome at three times tells it at all: subject effects make it a parabola. */
function varianceByTime(fit: ModelFit, visit: number, group: number): VarianceByTime {
	const { timeOrigin, timeUnit, positionsAreVisits } = fit.prepared.layout;
	const at = (s: number) =>
		fit.natural.covariance({
			time: Float64Array.of(timeOrigin + s * timeUnit),
			position: Int32Array.of(positionsAreVisits ? visit : 0),
			visit: Int32Array.of(visit),
			group
		})[0]!;
	const [before, here, after] = [at(-1), at(0), at(1)];
	return { level: here, line: (after - before) / 2, bend: (after + before) / 2 - here };
}

/** Variance of each row's outcome given the mean; outcome unit squared, in the order of the design's rows. */
export function marginalVariances(fit: ModelFit): Float64Array {
	const { natural, scale } = fit;
	const { design, layout } = fit.prepared;
	const { time, visit, subjectStart, subjectGroup } = design;
	const visits = Math.max(1, design.visits.length);
	const classes: (VarianceByTime | undefined)[] = [];
	const variances = new Float64Array(design.n);
	for (let s = 0; s < subjectGroup.length; s++) {
		const group = subjectGroup[s]!;
		for (let i = subjectStart[s]!; i < subjectStart[s + 1]!; i++) {
			const { level, line, bend } = (classes[group * visits + visit[i]!] ??= varianceByTime(
				fit,
				visit[i]!,
				group
			));
			const at = (time[i]! - layout.timeOrigin) / layout.timeUnit;
			variances[i] = scale * (level + at * (line + at * bend) + natural.visitRatio);
		}
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
 * Needs a first column of X that is all ones. Errors: `out-of-range`, `shape-mismatch`.
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
			if (contrast.length !== p) {
				throw new StatsError(
					'shape-mismatch',
					`The contrast has ${contrast.length} weights for ${p} coefficients.`,
					{ weights: contrast.length, coefficients: p }
				);
			}
			const w = toBasis(basis, contrast);
			return (n * quadratic(w, independent, p)) / quadratic(w, fit.coordinateCovariance, p);
		}
	};
}
