import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { componentIntervals, type ComponentInterval } from '../inference/component-intervals.js';
import type { IntervalEstimate, Supervision, VarianceComponent } from '../types.js';

/** Errors: `out-of-range`. */
function bounded({ name, estimate, lower, upper }: ComponentInterval): IntervalEstimate {
	if (estimate !== null && lower !== null && upper !== null) return { estimate, lower, upper };
	throw new StatsError(
		'out-of-range',
		`The data set no limit to the variance component “${name}”, so it has no interval.`,
		{ component: name }
	);
}

/** Variances and ICC of a fit with their profile-likelihood limits. Errors: `out-of-range`, `stopped`. */
export function variancesOf(
	fit: ModelFit,
	confidence: number,
	supervision: Supervision
): { components: VarianceComponent[]; icc: IntervalEstimate | null } {
	const found = componentIntervals(fit, confidence, supervision);
	const named = (name: string) => {
		const one = found.find((c) => c.name === name);
		return one ? bounded(one) : null;
	};
	const component = (name: VarianceComponent['name'], v: IntervalEstimate | null) =>
		v ? [{ name, ...v, standardDeviation: Math.sqrt(v.estimate) }] : [];
	return {
		components: [
			...component('subject', named('subject level')),
			...component('residual', named('residual'))
		],
		icc: named('ICC')
	};
}
