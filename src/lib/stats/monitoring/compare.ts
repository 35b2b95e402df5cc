import { normalAbove, normalUpperQuantile, studentAbove } from '../numeric/distribution.js';
import { StatsError } from '../errors.js';

/** What the tested contrast gave at a look. */
export interface TestedContrast {
	t: number;
	/** Degrees of freedom of t; Infinity for a normal statistic. */
	df: number;
}

/** The smallest p a z is made from: beyond it both are off the scale of any boundary. */
const LEAST_P = 1e-300;

/**
 * The one-sided p-value of a t and the z with the same p: what the model's small samples are judged by.
 *
 * A boundary is a nominal level; t on few degrees of freedom reaches it later than a normal z would.
 */
export function normalEquivalent({ t, df }: TestedContrast): { pOneSided: number; z: number } {
	if (!Number.isFinite(t) || !(df > 0))
		throw new StatsError(
			'not-finite',
			`A finite t and positive degrees of freedom are needed, not t = ${t} on ${df}.`
		);
	const tail = df === Infinity ? normalAbove(Math.abs(t)) : studentAbove(Math.abs(t), df);
	const size = normalUpperQuantile(Math.max(LEAST_P, tail));
	return { pOneSided: t < 0 ? 1 - tail : tail, z: t < 0 ? -size : size };
}
