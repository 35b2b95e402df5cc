import { StatsError } from '../errors.js';
import { perSide } from './check-plan.js';
import { boundariesOf } from './boundaries.js';
import { reachFor, stoppingProbabilities } from './crossing.js';
import type { MonitoringDesign } from './types.js';

/** How a design behaves when the drift is what it is. */
export interface Operating {
	drift: number;
	/** Probability of crossing for efficacy (above) at each look. */
	efficacy: number[];
	/** Probability of crossing below at each look: the other side of a two-sided plan, futility of a one-sided one. */
	below: number[];
	/** Probability of stopping at each look, whatever for; the last look takes all that is left. */
	stopping: number[];
	/** Probability of ever crossing above. */
	power: number;
	/** Expected fraction of the maximum information. */
	expectedFraction: number;
	/** Expected information relative to the test with one look and the same α and power. */
	expectedRelativeToFixed: number;
}

/**
 * Stopping probabilities, power and expected information of a design under any drift.
 *
 * `drift` is effect × √(maximum information): 0 is the null, `design.drift` the alternative it was made for.
 * With `futility` obeyed (where the plan has it) whoever falls below it stops.
 * Source: Jennison & Turnbull (2000), chapters 2 to 4 and 19.
 */
export function operatingCharacteristics(
	design: MonitoringDesign,
	drift: number,
	futility: 'obeyed' | 'ignored' = 'obeyed'
): Operating {
	if (!Number.isFinite(drift) || Math.abs(drift) > 100)
		throw new StatsError(
			'bad-option',
			`The drift must lie between −100 and 100; ${drift} was given.`,
			{ drift }
		);
	const boundaries = boundariesOf(design, futility);
	const reach = reachFor(perSide(design.plan));
	const { upper, lower } = stoppingProbabilities(boundaries, drift, reach);
	const stopping = upper.map((p, k) => p + lower[k]!);
	const last = stopping.length - 1;
	const before = stopping.slice(0, last).reduce((sum, p) => sum + p, 0);
	stopping[last] = Math.max(0, 1 - before);
	const expectedFraction = stopping.reduce((sum, p, k) => sum + p * boundaries.fractions[k]!, 0);
	return {
		drift,
		efficacy: upper,
		below: lower,
		stopping,
		power: upper.reduce((sum, p) => sum + p, 0),
		expectedFraction,
		expectedRelativeToFixed: expectedFraction * design.inflationFactor
	};
}
