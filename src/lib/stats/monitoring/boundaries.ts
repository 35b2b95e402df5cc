import { normalAbove, normalUpperQuantile } from '../numeric/distribution-normal.js';
import { monotoneRoot } from '../numeric/root.js';
import {
	pastLook,
	probabilityOfCrossing,
	reachFor,
	stoppingProbabilities,
	zAbove
} from './crossing.js';
import { checkPlan, perSide } from './check-plan.js';
import { start } from './paths.js';
import { spentBy } from './spending.js';
import { solveFutility, type FutilitySolution } from './futility.js';
import type {
	Boundaries,
	EfficacyRule,
	MonitoringDesign,
	MonitoringPlan,
	SpendingRule
} from './types.js';

/** A boundary further out than this cannot be reached in any data: it is reported as none. */
const FARTHEST = 37;

/** Both boundaries of a plan of that many sides with these upper ones; the lower ones of one side are not there. */
export function withSides(
	fractions: readonly number[],
	upper: readonly number[],
	sides: 1 | 2
): Boundaries {
	return { fractions, upper, lower: upper.map((z) => (sides === 2 ? -z : -Infinity)) };
}

/** Fraction^(Δ − 1/2). Source: Wang & Tsiatis (1987), Biometrics 43:193-199. */
function shapeOf(rule: EfficacyRule, t: number): number {
	if (rule.kind === 'pocock') return 1;
	if (rule.kind === 'obrien-fleming') return 1 / Math.sqrt(t);
	return t ** (rule.parameter! - 0.5);
}

/**
 * z boundaries for efficacy at each look, such that exactly α per side is spent under the null; Infinity where a
 * look cannot stop. Futility plays no part: it is non-binding.
 *
 * Source: Pocock (1977), Biometrika 64:191-199; O'Brien & Fleming (1979), Biometrics 35:549-556; Wang & Tsiatis
 * (1987); Lan & DeMets (1983). Boundaries are exact to about 1e-11.
 */
export function efficacyBoundaries(
	plan: Pick<MonitoringPlan, 'informationFractions' | 'sides' | 'alpha' | 'efficacy'>
): number[] {
	const { informationFractions: fractions, sides, efficacy } = plan;
	const level = perSide(plan);
	const { kind } = efficacy;
	if (kind === 'pocock' || kind === 'obrien-fleming' || kind === 'wang-tsiatis')
		return classical(fractions, sides, level, efficacy);
	const spent = fractions.map((t) => spentBy(efficacy as SpendingRule, level, t));
	spent[spent.length - 1] = level;
	return spend(fractions, sides, spent);
}

function classical(
	fractions: readonly number[],
	sides: 1 | 2,
	level: number,
	rule: EfficacyRule
): number[] {
	const shape = fractions.map((t) => shapeOf(rule, t));
	const boundary = (c: number) => shape.map((s) => (c * s > FARTHEST ? Infinity : c * s));
	const reach = reachFor(level);
	// The one look at the least of the boundaries spends less than α; the looks apart from each other spend more.
	const least = Math.min(...shape);
	const from = normalUpperQuantile(level) / least;
	const to = normalUpperQuantile(level / fractions.length) / least;
	const apart = (c: number) =>
		Math.log(probabilityOfCrossing(withSides(fractions, boundary(c), sides), 0, reach) / level);
	if (fractions.length === 1) return boundary(from);
	return boundary(monotoneRoot(apart, from * (1 - 1e-9), to * (1 + 1e-9)));
}

/** z boundaries that have spent `spent` (one side, cumulative, under the null) by each look. */
export function spend(
	fractions: readonly number[],
	sides: 1 | 2,
	spent: readonly number[]
): number[] {
	const increments = spent.map((s, k) => Math.max(0, s - (spent[k - 1] ?? 0)));
	const reach = reachFor(Math.min(...increments.filter((s) => s > 0)));
	const upper: number[] = [];
	let going = start();
	fractions.forEach((at, k) => {
		if (k > 0) going = pastLook(going, withSides(fractions, upper, sides), k - 1, 0, reach);
		upper.push(zAbove(going, at, 0, increments[k]!));
	});
	return upper;
}

/**
 * The drift at which a plan without futility crosses above with probability `power`.
 *
 * Source: Jennison & Turnbull (2000), chapters 2 and 4.
 */
export function driftFor(boundaries: Boundaries, power: number, guess: number): number {
	const short = (drift: number) => probabilityOfCrossing(boundaries, drift) - power;
	let [from, to] = [guess * 0.999, guess * 1.1];
	for (let step = 0; step < 60 && short(to) < 0; step++) to += Math.max(guess, 0.5) * 0.3;
	for (let step = 0; step < 60 && short(from) > 0; step++) from -= Math.max(guess, 0.5) * 0.3;
	return monotoneRoot(short, from, to);
}

/**
 * The boundaries of a plan, the drift at which it has its power, and what each look costs.
 *
 * With futility, its boundaries and the drift are solved together, so that the power is exact.
 * @throws StatsError `bad-option` for a plan that cannot be, `out-of-range` for looks too close together
 */
export function designMonitoring(plan: MonitoringPlan): MonitoringDesign {
	checkPlan(plan);
	const fractions = plan.informationFractions;
	const upper = efficacyBoundaries(plan);
	const level = perSide(plan);
	const boundaries = withSides(fractions, upper, plan.sides);
	const fixedDrift = normalUpperQuantile(level) + normalUpperQuantile(1 - plan.power);
	const underNull = stoppingProbabilities(boundaries, 0, reachFor(level));
	const futility: FutilitySolution | null = plan.futility
		? solveFutility(plan.futility, fractions, upper, fixedDrift)
		: null;
	const drift = futility ? futility.drift : driftFor(boundaries, plan.power, fixedDrift);
	let spent = 0;
	return {
		plan,
		looks: fractions.map((fraction, k) => {
			spent += underNull.upper[k]! * plan.sides;
			const lower = futility?.z[k] ?? -Infinity;
			return {
				fraction,
				efficacyZ: finite(upper[k]!),
				nominalPOneSided: normalAbove(upper[k]!),
				cumulativeAlpha: spent,
				futilityZ: futility ? finite(lower) : null
			};
		}),
		drift,
		fixedDrift,
		inflationFactor: (drift / fixedDrift) ** 2
	};
}

const finite = (z: number) => (Number.isFinite(z) ? z : null);

/** The boundaries of a design, with or without its futility obeyed. */
export function boundariesOf(
	design: Pick<MonitoringDesign, 'looks' | 'plan'>,
	futility: 'obeyed' | 'ignored'
): Boundaries {
	const { looks, plan } = design;
	const upper = looks.map((look) => look.efficacyZ ?? Infinity);
	const both = withSides(plan.informationFractions, upper, plan.sides);
	if (futility === 'ignored' || !plan.futility) return both;
	return { ...both, lower: looks.map((look) => look.futilityZ ?? -Infinity) };
}
