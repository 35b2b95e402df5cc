import { normalUpperQuantile } from '../numeric/distribution-normal.js';
import {
	densityAt,
	goOn,
	probabilityAbove,
	probabilityBelow,
	probabilityGoing,
	start,
	type Going
} from './paths.js';
import type { Boundaries } from './types.js';

/** What is kept of the paths, in standard deviations from their mean, unless a boundary lies further out. */
export const USUAL_REACH = 9;
/** Errors below this are as good as none: the boundary that spends them is beyond z = 33. */
export const NOTHING = 1e-240;

/** Enough reach to give the probability of a tail as small as `least` all its digits. */
export function reachFor(least: number): number {
	return least > 1e-6 ? USUAL_REACH : Math.max(USUAL_REACH, normalUpperQuantile(least) + 6);
}

/** The probabilities of stopping at each look, above and below. */
export interface Stopping {
	upper: number[];
	lower: number[];
}

/** The paths that go on past look k, given those before it; a look that cannot stop is passed over. */
export function pastLook(
	going: Going,
	boundaries: Boundaries,
	k: number,
	drift: number,
	reach = USUAL_REACH
): Going {
	const at = boundaries.fractions[k]!;
	const [lower, upper] = [boundaries.lower[k]!, boundaries.upper[k]!];
	const next = boundaries.fractions[k + 1] ?? at + 1;
	if (lower === -Infinity && upper === Infinity) return going;
	const root = Math.sqrt(at);
	return goOn(going, { at, next, drift, lower: lower * root, upper: upper * root, reach });
}

/**
 * Probabilities of stopping at each look above its upper and below its lower boundary, under `drift`.
 *
 * Error about 1e-13, absolute; small tails keep their relative digits.
 */
export function stoppingProbabilities(
	boundaries: Boundaries,
	drift: number,
	reach = USUAL_REACH
): Stopping {
	const result: Stopping = { upper: [], lower: [] };
	let going = start();
	const looks = boundaries.fractions.length;
	for (let k = 0; k < looks; k++) {
		const at = boundaries.fractions[k]!;
		const root = Math.sqrt(at);
		const [lower, upper] = [boundaries.lower[k]!, boundaries.upper[k]!];
		result.upper.push(upper === Infinity ? 0 : probabilityAbove(going, at, drift, upper * root));
		result.lower.push(lower === -Infinity ? 0 : probabilityBelow(going, at, drift, lower * root));
		if (k < looks - 1) going = pastLook(going, boundaries, k, drift, reach);
	}
	return result;
}

/** The probability of ever stopping above, under `drift`. */
export function probabilityOfCrossing(
	boundaries: Boundaries,
	drift: number,
	reach = USUAL_REACH
): number {
	return stoppingProbabilities(boundaries, drift, reach).upper.reduce((sum, p) => sum + p, 0);
}

/**
 * The z at information `at` above which paths still going have probability `area`; Infinity when that is nothing.
 *
 * Newton's steps on the logarithm of the area, which is concave in z: from a start at or beyond the answer they
 * come down to it without ever passing it. Two such starts are known, the quantile as if nobody had stopped and
 * the quantile as if all who go on stood at the highest score; the nearer is taken.
 */
export function zAbove(going: Going, at: number, drift: number, area: number): number {
	if (!(area > NOTHING)) return Infinity;
	const inAll = probabilityGoing(going);
	if (!(area < inAll)) return -Infinity;
	const root = Math.sqrt(at);
	const gap = at - going.at;
	const highest = going.scores[going.scores.length - 1]! + drift * gap;
	let z = Math.min(
		normalUpperQuantile(area) + drift * root,
		(highest + Math.sqrt(gap) * normalUpperQuantile(area / inAll)) / root
	);
	for (let step = 0; step < 200; step++) {
		const found = probabilityAbove(going, at, drift, z * root);
		const slope = densityAt(going, at, drift, z * root) * root;
		if (!(slope > 0) || !(found > 0)) return z;
		const change = (found / slope) * Math.log(found / area);
		z += change;
		if (Math.abs(change) <= 1e-13 * Math.max(1, Math.abs(z))) return z;
	}
	return z;
}

/** The z at information `at` below which paths still going have probability `area`; −Infinity when that is nothing. */
export function zBelow(going: Going, at: number, drift: number, area: number): number {
	const mirrored: Going = {
		at: going.at,
		scores: going.scores.map((_, j, all) => -all[all.length - 1 - j]!),
		mass: going.mass.map((_, j, all) => all[all.length - 1 - j]!)
	};
	return -zAbove(mirrored, at, -drift, area);
}
