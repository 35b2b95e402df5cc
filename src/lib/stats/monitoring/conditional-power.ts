import { StatsError } from '../errors.js';
import { probabilityOfCrossing, USUAL_REACH } from './crossing.js';

/** What was seen at a look that is not the last, with the upper boundaries still to come. */
export interface Interim {
	/** Information fraction of the look, > 0. */
	fraction: number;
	z: number;
	/** Fractions of the looks to come, increasing, all beyond `fraction`. */
	remaining: readonly number[];
	/** Their efficacy z; Infinity where a look cannot stop. */
	remainingZ: readonly number[];
}

/** Largest |z| that is taken for a statistic and not for an accident. */
export const MOST_Z = 35;

function check(interim: Interim): void {
	if (!Number.isFinite(interim.z) || Math.abs(interim.z) > MOST_Z)
		throw new StatsError(
			'bad-option',
			`The z of a look must lie between −${MOST_Z} and ${MOST_Z}; ${interim.z} was given.`,
			{ z: interim.z }
		);
	if (interim.remaining.length === 0 || interim.remaining.length !== interim.remainingZ.length)
		throw new StatsError(
			'shape-mismatch',
			'Conditional power needs at least one look to come, each with its boundary.'
		);
}

/**
 * The probability of crossing for efficacy at any look to come, given z so far, when the drift is `drift`.
 *
 * The score from here on is a process of its own that starts at 0: its boundary at information t is z_t √t − z √s.
 * Futility and a lower efficacy boundary are not obeyed.
 * Source: Lan, Simon & Halperin (1982), Sequential Analysis 1:207-219; Jennison & Turnbull (2000), chapter 10.
 */
export function conditionalPower(interim: Interim, drift: number): number {
	check(interim);
	return crossingFrom(
		interim,
		drift,
		(t) => t - interim.fraction,
		() => 1
	);
}

/** The same for the last look alone: the usual short form, as if no look lay between. */
export function conditionalPowerFinalOnly(interim: Interim, drift: number): number {
	return conditionalPower(lastOnly(interim), drift);
}

/** The drift that goes on as it has gone: z / √fraction. */
export const trendOf = (interim: Pick<Interim, 'fraction' | 'z'>) =>
	interim.z / Math.sqrt(interim.fraction);

/**
 * The probability of crossing for efficacy at any look to come, the drift being unknown with a flat prior.
 *
 * The drift given z so far is normal about the trend with variance 1/s. Averaged over it, the score from here on,
 * divided by 1 + r/s at r beyond s, is again a process with independent increments, drift the trend and clock
 * r / (1 + r/s): so this is conditional power under the trend with that clock, exactly.
 * Source: Spiegelhalter, Freedman & Blackburn (1986), Controlled Clinical Trials 7:8-17 (predictive power); the
 * change of clock is that of a Brownian motion with random drift.
 */
export function predictivePower(interim: Interim): number {
	check(interim);
	const s = interim.fraction;
	return crossingFrom(
		interim,
		trendOf(interim),
		(t) => (t - s) / (1 + (t - s) / s),
		(t) => 1 + (t - s) / s
	);
}

export function predictivePowerFinalOnly(interim: Interim): number {
	return predictivePower(lastOnly(interim));
}

function crossingFrom(
	interim: Interim,
	drift: number,
	clock: (t: number) => number,
	shrink: (t: number) => number
): number {
	const score = interim.z * Math.sqrt(interim.fraction);
	const fractions = interim.remaining.map(clock);
	const upper = interim.remaining.map((t, j) => {
		const z = interim.remainingZ[j]!;
		return z === Infinity
			? Infinity
			: (z * Math.sqrt(t) - score) / shrink(t) / Math.sqrt(fractions[j]!);
	});
	const lower = upper.map(() => -Infinity);
	return Math.min(1, probabilityOfCrossing({ fractions, upper, lower }, drift, USUAL_REACH));
}

function lastOnly(interim: Interim): Interim {
	return {
		...interim,
		remaining: interim.remaining.slice(-1),
		remainingZ: interim.remainingZ.slice(-1)
	};
}
