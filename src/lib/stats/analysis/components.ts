import type { ModelFit } from '../fit/fit-model.js';
import { componentIntervals } from '../inference/component-intervals.js';
import { componentsOf as withoutLimits } from '../inference/components.js';
import type { Supervision } from '../types.js';
import type { Component } from './result.js';

/** Up to as many parameters of the covariance, limits take a second or so; the time grows with the cube of their number. */
const FEW = 10;

export interface AnalysedComponents {
	parts: Component[];
	/** Null without one. */
	icc: Component | null;
	/** Whether limits were looked for. */
	limits: boolean;
}

/**
 * The parts of the covariance, and the ICC apart, with profile-likelihood limits.
 *
 * `limits` left out: when there are at most ten parameters.
 */
export function componentsOf(
	fit: ModelFit,
	confidence: number,
	limits = fit.working.length <= FEW,
	supervision: Supervision = {}
): AnalysedComponents {
	const found = limits
		? componentIntervals(fit, confidence, supervision)
		: withoutLimits(fit).map((c) => ({ ...c, lower: null, upper: null }));
	const all = found.map(({ name, estimate, lower, upper, atEdge }): Component => ({
		name,
		estimate,
		lower,
		upper,
		atEdge
	}));
	return {
		parts: all.filter((c) => c.name !== 'ICC'),
		icc: all.find((c) => c.name === 'ICC') ?? null,
		limits
	};
}
