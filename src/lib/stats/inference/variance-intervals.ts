import type { Fit } from '../fit/fit-mixed.js';
import { atRatio, deviance, profileDeviance } from '../fit/objective.js';
import { chiSquareQuantile } from '../numeric/distribution.js';
import { findRoot, minimise } from '../numeric/minimise.js';
import type { IntervalEstimate } from '../types.js';

/** log(1 + ratio) beyond which no profile is followed: a ratio of 1e12. */
const FURTHEST = Math.log1p(1e12);
const STEP = 0.25;

/** From `from` in steps growing by half, the first stretch over which `excess` rises above zero, then its root. */
function outward(excess: (x: number) => number, from: number, step: number, end: number): number {
	let near = from;
	let stride = step;
	while (near !== end) {
		const far = step > 0 ? Math.min(near + stride, end) : Math.max(near + stride, end);
		if (excess(far) > 0) return findRoot(excess, near, far, 1e-9);
		near = far;
		stride *= 1.5;
	}
	return end;
}

/**
 * Profile-likelihood limits of the ICC, each variance component, at `confidence`; variances in outcome unit squared.
 *
 * The limits are where −2 log-likelihood, the other parameters at their best, has risen by the chi-squared
 * quantile on 1 df. On the boundary the lower limit of the subject variance is 0. The restricted likelihood is used
 * under REML (the mean is the same throughout, so it may be compared).
 * Source: Venzon & Moolgavkar (1988), Applied Statistics 37:87-94.
 */
export function varianceIntervals(
	fit: Fit,
	confidence: number
): { subject: IntervalEstimate | null; residual: IntervalEstimate; icc: IntervalEstimate | null } {
	const { products, method, at } = fit;
	const { subject, residual } = fit.varianceComponents;
	const ceiling = -2 * fit.logLikelihood + chiSquareQuantile(confidence, 1);
	const point = (x: number) => atRatio(products, method, Math.expm1(x));
	const best = Math.log1p(at.ratio);

	if (subject === null) {
		const excess = (logVariance: number) => deviance(at, Math.exp(logVariance)) - ceiling;
		const centre = Math.log(residual);
		return {
			subject: null,
			residual: {
				estimate: residual,
				lower: Math.exp(outward(excess, centre, -STEP, centre - 60)),
				upper: Math.exp(outward(excess, centre, STEP, centre + 60))
			},
			icc: null
		};
	}

	const iccExcess = (x: number) => profileDeviance(point(x)) - ceiling;
	const iccLimits = {
		lower: iccExcess(0) <= 0 ? 0 : findRoot(iccExcess, 0, best, 1e-9),
		upper: outward(iccExcess, best, STEP, FURTHEST)
	};

	// The residual variance is held, the ratio is free.
	const residualExcess = (logVariance: number) => {
		const f = (x: number) => deviance(point(x), Math.exp(logVariance));
		const inside = minimise(f, 0, best + 8, 1e-7);
		return Math.min(inside.value, f(0)) - ceiling;
	};
	const logResidual = Math.log(residual);

	// The subject variance is held, the residual variance is free and moves the ratio with it.
	const subjectExcess = (variance: number) => {
		const f = (logVariance: number) => {
			const v = Math.exp(logVariance);
			return deviance(atRatio(products, method, variance / v), v);
		};
		return minimise(f, logResidual - 6, Math.log(residual + subject) + 6, 1e-7).value - ceiling;
	};
	const upperSubject = outward(
		(x) => subjectExcess(subject + residual * Math.expm1(x)),
		0,
		STEP,
		FURTHEST
	);
	return {
		subject: {
			estimate: subject,
			lower: iccLimits.lower === 0 ? 0 : findRoot(subjectExcess, 0, subject, 1e-9),
			upper: subject + residual * Math.expm1(upperSubject)
		},
		residual: {
			estimate: residual,
			lower: Math.exp(outward(residualExcess, logResidual, -STEP, logResidual - 60)),
			upper: Math.exp(outward(residualExcess, logResidual, STEP, logResidual + 60))
		},
		icc: {
			estimate: at.ratio / (1 + at.ratio),
			lower: -Math.expm1(-iccLimits.lower),
			upper: -Math.expm1(-iccLimits.upper)
		}
	};
}
