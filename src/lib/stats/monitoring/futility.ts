import { StatsError } from '../errors.js';
import { monotoneRoot } from '../numeric/root.js';
import { pastLook, reachFor, stoppingProbabilities, zBelow } from './crossing.js';
import { probabilityBelow, start } from './paths.js';
import { spentBy } from './spending.js';
import type { FutilityRule, SpendingRule } from './types.js';

export interface FutilitySolution {
	/** For each look; the last is the efficacy boundary, −Infinity where a look cannot stop for futility. */
	z: number[];
	/** The drift at which the trial fails with probability β, counting stops for futility. */
	drift: number;
}

/** Futility boundaries at one drift, and the probability of failing with them. */
interface Attempt {
	z: number[];
	failing: number;
	/** Look at which futility reached efficacy, so that nobody could go on; null when none did. */
	met: number | null;
}

/**
 * Futility boundaries that spend β under the drift, and the drift, solved together: the power is exactly 1 − β.
 *
 * At each look β is spent as the rule says among paths that crossed neither boundary before; at the last look
 * whoever is not above the efficacy boundary has failed. The drift at which those failures add up to β is the root.
 * Source: Pampallona, Tsiatis & Kim (2001), Drug Information Journal 35:1113-1121; Jennison & Turnbull (2000),
 * chapter 19.
 * @throws StatsError `bad-option` when the boundaries meet before the last look
 */
export function solveFutility(
	rule: FutilityRule,
	fractions: readonly number[],
	upper: readonly number[],
	fixedDrift: number
): FutilitySolution {
	const attempt =
		rule.kind === 'fixed'
			? (drift: number) => withFixed(rule.z, fractions, upper, drift)
			: (drift: number) => spendBeta(rule, rule.beta, fractions, upper, drift);
	const apart = (drift: number) => attempt(drift).failing - rule.beta;
	// From below there are too many failures, from above too few.
	let from = fixedDrift;
	let to = fixedDrift * 1.1;
	const stride = Math.max(0.25, fixedDrift * 0.25);
	for (let step = 0; step < 60 && apart(from) < 0; step++) from -= stride;
	for (let step = 0; step < 60 && apart(to) > 0; step++) to += stride;
	if (apart(from) < 0 || apart(to) > 0) noAnswer(rule.beta);
	const drift = monotoneRoot(apart, from, to);
	const { z, met, failing } = attempt(drift);
	if (met !== null)
		throw new StatsError(
			'bad-option',
			`Futility would reach efficacy at look ${met + 1} of ${fractions.length}, so that no trial could go on; spend less beta early or alpha later.`,
			{ look: met + 1 }
		);
	if (!(Math.abs(failing - rule.beta) < 1e-8)) noAnswer(rule.beta);
	return { z, drift };
}

function noAnswer(beta: number): never {
	throw new StatsError(
		'bad-option',
		`No effect gives a power of ${1 - beta} with these futility boundaries.`,
		{ beta }
	);
}

/** Futility boundaries at a given drift that have spent `spent` by each look but the last. */
export function spendBelow(
	fractions: readonly number[],
	upper: readonly number[],
	spent: readonly number[],
	drift: number
): Attempt {
	const lower: number[] = [];
	const reach = reachFor(Math.min(1, ...spent.filter((s) => s > 0)));
	const last = fractions.length - 1;
	let going = start();
	let failing = 0;
	let met: number | null = null;
	for (let k = 0; k < last; k++) {
		const at = fractions[k]!;
		const z = zBelow(going, at, drift, spent[k]! - (spent[k - 1] ?? 0));
		if (z >= upper[k]! && met === null) met = k;
		lower.push(Math.min(z, upper[k]!));
		failing += probabilityBelow(going, at, drift, lower[k]! * Math.sqrt(at));
		going = pastLook(going, { fractions, upper, lower }, k, drift, reach);
	}
	lower.push(upper[last]!);
	failing += probabilityBelow(
		going,
		fractions[last]!,
		drift,
		upper[last]! * Math.sqrt(fractions[last]!)
	);
	return { z: lower, failing, met };
}

function spendBeta(
	rule: SpendingRule,
	beta: number,
	fractions: readonly number[],
	upper: readonly number[],
	drift: number
): Attempt {
	return spendBelow(
		fractions,
		upper,
		fractions.map((t) => spentBy(rule, beta, t)),
		drift
	);
}

function withFixed(
	z: readonly number[],
	fractions: readonly number[],
	upper: readonly number[],
	drift: number
): Attempt {
	const lower = [...z, upper[upper.length - 1]!];
	const met = z.findIndex((value, k) => value >= upper[k]!);
	const stopping = stoppingProbabilities({ fractions, upper, lower }, drift);
	return {
		z: lower,
		failing: stopping.lower.reduce((sum, p) => sum + p, 0),
		met: met < 0 ? null : met
	};
}
