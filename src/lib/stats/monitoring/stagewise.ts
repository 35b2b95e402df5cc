import { StatsError } from '../errors.js';
import { monotoneRoot } from '../numeric/root.js';
import { probabilityOfCrossing } from './crossing.js';
import { MOST_Z } from './conditional-power.js';
import type { Boundaries } from './types.js';

/** A trial that stopped (or is judged as if it had): the looks up to there and what the last of them gave. */
export interface Stopped {
	/** Information fractions of the looks up to the stop; the last is that of `z`. */
	fractions: readonly number[];
	/** Efficacy z of the looks before it; Infinity where a look could not stop. */
	upperBefore: readonly number[];
	sides: 1 | 2;
	z: number;
}

export interface StagewiseAnalysis {
	/** One-sided p of the upper side; a two-sided one is twice the smaller of it and its complement. */
	p: number;
	/** Median-unbiased drift: as likely to be too high as too low. */
	medianUnbiasedDrift: number;
	/** Limits of the drift, each missed with probability (1 − confidence)/2. */
	driftInterval: [number, number];
	confidence: number;
}

/**
 * The probability, under `drift`, of a result at least as high as the one seen, in stage-wise order: an earlier
 * upper crossing is higher than a later one, and within a look a higher z.
 */
export function stagewiseProbability(stopped: Stopped, drift: number): number {
	const { fractions, upperBefore, sides, z } = stopped;
	const boundaries: Boundaries = {
		fractions,
		upper: [...upperBefore, z],
		lower: [...upperBefore.map((u) => (sides === 2 ? -u : -Infinity)), -Infinity]
	};
	return Math.min(1, probabilityOfCrossing(boundaries, drift));
}

/**
 * p-value, median-unbiased drift and interval of a trial on stopping, by stage-wise ordering.
 *
 * The drift is effect × √(information at fraction 1); divide by √(that information) for the effect. Looks that
 * were still to come play no part, which is why this order is preferred with flexible looks. Futility is non-binding
 * and left out.
 * Source: Tsiatis, Rosner & Mehta (1984), Biometrics 40:797-803; Jennison & Turnbull (2000), chapter 8.
 */
export function stagewiseAnalysis(stopped: Stopped, confidence = 0.95): StagewiseAnalysis {
	const { fractions, upperBefore, z } = stopped;
	if (fractions.length === 0 || upperBefore.length !== fractions.length - 1)
		throw new StatsError(
			'shape-mismatch',
			'A stopped trial needs a boundary for each look before the last.'
		);
	if (!Number.isFinite(z) || Math.abs(z) > MOST_Z)
		throw new StatsError(
			'bad-option',
			`The z of a look must lie between −${MOST_Z} and ${MOST_Z}; ${z} was given.`,
			{ z }
		);
	if (!(confidence > 0 && confidence < 1))
		throw new StatsError(
			'bad-option',
			`Confidence must lie between 0 and 1; ${confidence} was given.`,
			{ confidence }
		);
	const tail = (1 - confidence) / 2;
	return {
		p: stagewiseProbability(stopped, 0),
		medianUnbiasedDrift: driftWith(stopped, 0.5),
		driftInterval: [driftWith(stopped, tail), driftWith(stopped, 1 - tail)],
		confidence
	};
}

/** The drift under which the result seen, or a higher one, has probability `wanted`; it rises with the drift. */
function driftWith(stopped: Stopped, wanted: number): number {
	const apart = (drift: number) => stagewiseProbability(stopped, drift) - wanted;
	const at = stopped.fractions[stopped.fractions.length - 1]!;
	const centre = stopped.z / Math.sqrt(at);
	let width = 4 / Math.sqrt(at);
	let [from, to] = [centre - width, centre + width];
	for (let step = 0; step < 40 && apart(from) > 0; step++) {
		width *= 1.5;
		from -= width;
	}
	for (let step = 0; step < 40 && apart(to) < 0; step++) {
		width *= 1.5;
		to += width;
	}
	if (apart(from) > 0 || apart(to) < 0)
		throw new StatsError(
			'out-of-range',
			'The drift that would make this result likely is too far out to be found.',
			{ z: stopped.z }
		);
	return monotoneRoot(apart, from, to, 1e-11);
}

/**
 * Repeated confidence limits of the drift at a look: those whose probability of covering it at all looks together
 * is 1 − α (both sides). Null where the look's boundary cannot be reached: no finite limits are given there.
 *
 * Source: Jennison & Turnbull (1989), JRSS B 51:305-361: (z ∓ c) / √t.
 */
export function repeatedInterval(
	z: number,
	fraction: number,
	efficacyZ: number | null
): [number, number] | null {
	if (efficacyZ === null) return null;
	const root = Math.sqrt(fraction);
	return [(z - efficacyZ) / root, (z + efficacyZ) / root];
}

/**
 * A stopped trial in which more information came in after the decision (overrun), for `stagewiseAnalysis`.
 *
 * The look that stopped the trial is taken out and the later, fuller analysis put in its place, which keeps the
 * type I error as the deleted look lies between known ones.
 * Source: Whitehead (1992), Statistics in Medicine 11:1261-1268 (the deletion method).
 */
export function withOverrun(stopped: Stopped, fraction: number, z: number): Stopped {
	const last = stopped.fractions[stopped.fractions.length - 1]!;
	if (!(fraction >= last))
		throw new StatsError(
			'bad-option',
			`Information only grows: ${fraction} after the stop is less than ${last} at it.`,
			{ fraction, last }
		);
	return { ...stopped, fractions: [...stopped.fractions.slice(0, -1), fraction], z };
}
