import { effectiveSizes } from '../analysis/effective-sizes.js';
import type { ModelFit } from '../fit/fit-model.js';

/** How many independent rows would tell as much, under one model. */
export interface EffectiveSampleSizes {
	mean: number;
	/** Of the chosen contrast; null without one. */
	contrast: number | null;
}

/** Effective sample sizes of a fit for the mean and for weights on the columns of X. Errors: `out-of-range`. */
export function sizesOf(
	fit: ModelFit,
	weights: readonly number[] | undefined
): EffectiveSampleSizes {
	const sizes = effectiveSizes(fit);
	return { mean: sizes.mean, contrast: weights ? sizes.of(weights) : null };
}
