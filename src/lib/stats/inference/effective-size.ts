import type { Fit } from '../fit/fit-mixed.js';
import type { EffectiveSampleSize } from '../types.js';

/** τ² / (τ² + σ²); unitless, 0 to 1; null without a lasting offset in the model. */
export function intraclassCorrelation(fit: Fit): number | null {
	return fit.varianceComponents.subject === null ? null : fit.at.ratio / (1 + fit.at.ratio);
}

/**
 * How many independent outcomes would tell as much about the mean; unitless, between subjects and rows.
 *
 * Σ n_i / (1 + (n_i − 1) ICC), which is N n / (1 + (n − 1) ICC) when each of N subjects is seen n times. It is the
 * variance of one outcome times 1'V⁻¹1, the precision of the generalised least-squares mean, and it is for the mean
 * only: a difference within subjects, such as a slope, may be known better than the rows alone suggest.
 * Source: design effect 1 + (n − 1) ICC, Kish (1965), Survey Sampling, 5.4; Killip, Mahfoud & Pearce (2004),
 * Annals of Family Medicine 2:204-208; the unbalanced sum is common practice.
 */
export function effectiveSampleSize(fit: Fit): EffectiveSampleSize {
	const icc = intraclassCorrelation(fit) ?? 0;
	const forMean = fit.products.classes.reduce(
		(sum, c) => sum + (c.subjects * c.size) / (1 + (c.size - 1) * icc),
		0
	);
	return { forMean, designEffect: fit.products.n / forMean };
}
