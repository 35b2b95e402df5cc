import { StatsError } from '../errors.js';
import { normalAbove, normalUpperQuantile } from '../numeric/distribution-normal.js';
import { perSide } from './check-plan.js';
import { pastLook, reachFor, zAbove, zBelow } from './crossing.js';
import { start, type Going } from './paths.js';
import { withSides } from './boundaries.js';
import { spentBy } from './spending.js';
import type { Interim } from './conditional-power.js';
import type { Stopped } from './stagewise.js';
import type { Boundaries, MonitoringDesign, SpendingRule } from './types.js';

/** A look as it came: 1/se² of the tested contrast, and whether it was the last. */
export interface SeenLook {
	information: number;
	final?: boolean;
}

/** The boundary of a look that was held, or is about to be. */
export interface RunningLook {
	information: number;
	/** Information over that planned for the end; above 1 after an overrun. */
	fraction: number;
	final: boolean;
	/**
	 * `spends`: tested at `efficacyZ`. `no-new-information`: information fell or stood still, nothing is tested.
	 * `nothing-left`: all α was spent before. `beyond-reach`: the function allows next to nothing this early.
	 */
	status: 'spends' | 'no-new-information' | 'nothing-left' | 'beyond-reach';
	efficacyZ: number | null;
	nominalPOneSided: number;
	/** Both sides together. */
	cumulativeAlpha: number;
	futilityZ: number | null;
}

/** Growth of information below this part of the maximum counts as none. */
const GROWTH = 1e-6;

/**
 * The boundaries of a running trial from the information its looks really had; the last look is the current one.
 *
 * α is spent by the plan's function of information ÷ `maximumInformation`, so looks may be skipped, added or come
 * early. A look at which information did not grow spends nothing. The final look spends all that is left, at
 * whatever information it comes (under- or overrun); should information have fallen at it, what is left is spent
 * as if it were independent of the looks before, which errs on the safe side. A classical plan spends what its own
 * boundaries spend at its planned fractions, in straight lines between them. Futility spends β likewise, under the
 * drift of the design.
 * Source: Lan & DeMets (1983, 1989), Biometrika 70:659-663 and Biometrics 45:1017-1020.
 * @param seen up to 100 looks in order, each with positive information
 */
export function runningBoundaries(
	design: MonitoringDesign,
	maximumInformation: number,
	seen: readonly SeenLook[]
): RunningLook[] {
	checkSeen(maximumInformation, seen);
	const { plan } = design;
	const level = perSide(plan);
	const spent = spendingOf(design, level);
	const lost = futilityOf(design);
	const fractions: number[] = [];
	const upper: number[] = [];
	const lower: number[] = [];
	let [alpha, beta] = [0, 0];
	/** Paths for efficacy under the null, and for futility under the design's drift. */
	let [underNull, underDesign] = [start(), start()];
	const looks: RunningLook[] = [];
	for (const { information, final = false } of seen) {
		const fraction = information / maximumInformation;
		const before = fractions[fractions.length - 1] ?? 0;
		const grew = fraction - before > GROWTH;
		const target = final ? level : Math.max(alpha, spent(Math.min(1, fraction)));
		const increment = grew || final ? target - alpha : 0;
		let z = Infinity;
		let futilityZ: number | null = null;
		if (grew) {
			if (fractions.length > 0) {
				underNull = past(underNull, withSides(fractions, upper, plan.sides), fraction, 0, level);
				if (lost)
					underDesign = past(
						underDesign,
						{ fractions, upper, lower },
						fraction,
						design.drift,
						level
					);
			}
			z = zAbove(underNull, fraction, 0, increment);
			fractions.push(fraction);
			upper.push(z);
			if (lost) {
				const betaTarget = Math.max(beta, lost.spent?.(Math.min(1, fraction)) ?? 0);
				const own =
					lost.zAt?.(fraction) ?? zBelow(underDesign, fraction, design.drift, betaTarget - beta);
				beta = betaTarget;
				const bound = final ? z : Math.min(own, z);
				lower.push(bound);
				futilityZ = Number.isFinite(bound) ? bound : null;
			}
		} else if (increment > 0) {
			z = normalUpperQuantile(increment);
			if (lost) futilityZ = z;
		}
		const spends = Number.isFinite(z);
		const nothingLeft = alpha >= level * (1 - 1e-12);
		if (spends) alpha += increment;
		looks.push({
			information,
			fraction,
			final,
			status: spends
				? 'spends'
				: nothingLeft
					? 'nothing-left'
					: grew
						? 'beyond-reach'
						: 'no-new-information',
			efficacyZ: spends ? z : null,
			nominalPOneSided: normalAbove(z),
			cumulativeAlpha: alpha * plan.sides,
			futilityZ
		});
	}
	return looks;
}

function past(
	going: Going,
	boundaries: Boundaries,
	next: number,
	drift: number,
	level: number
): Going {
	const k = boundaries.fractions.length - 1;
	const fractions = [...boundaries.fractions, next];
	return pastLook(going, { ...boundaries, fractions }, k, drift, reachFor(level * 1e-6));
}

function checkSeen(maximum: number, seen: readonly SeenLook[]): void {
	const refuse = (sentence: string): never => {
		throw new StatsError('bad-option', sentence);
	};
	if (!(maximum > 0) || !Number.isFinite(maximum))
		refuse(`The maximum information must be positive and finite, not ${maximum}.`);
	if (seen.length > 100) refuse(`At most 100 looks can be followed, not ${seen.length}.`);
	seen.forEach(({ information, final }, k) => {
		if (!(information > 0) || !Number.isFinite(information))
			refuse(`The information of look ${k + 1} must be positive and finite, not ${information}.`);
		if (final && k < seen.length - 1)
			refuse(`Look ${k + 1} was the final one, but ${seen.length - k - 1} more follow.`);
	});
}

/** One side's α spent by a fraction: the plan's function, or straight lines through a classical plan's own. */
function spendingOf(design: MonitoringDesign, level: number): (t: number) => number {
	const { efficacy, sides } = design.plan;
	if (efficacy.kind.startsWith('spending-'))
		return (t) => spentBy(efficacy as SpendingRule, level, t);
	const points = design.looks.map((look) => [look.fraction, look.cumulativeAlpha / sides] as const);
	return (t) => {
		let [from, low] = [0, 0];
		for (const [to, high] of points) {
			if (t <= to) return Math.min(level, low + ((high - low) * (t - from)) / (to - from));
			[from, low] = [to, high];
		}
		return level;
	};
}

function futilityOf(design: MonitoringDesign): {
	spent?: (t: number) => number;
	zAt?: (t: number) => number;
} | null {
	const { futility, informationFractions } = design.plan;
	if (!futility) return null;
	if (futility.kind !== 'fixed') return { spent: (t) => spentBy(futility, futility.beta, t) };
	return {
		zAt: (t) =>
			futility.z.reduce(
				(best, z, k) => {
					const apart = Math.abs(informationFractions[k]! - t);
					return apart < best.apart ? { apart, z } : best;
				},
				{ apart: Infinity, z: -Infinity }
			).z
	};
}

export type Verdict = 'efficacy' | 'efficacy-below' | 'futility' | 'go-on' | 'not-tested';

/** Which boundary a z reached at a look. The board decides; this only compares. */
export function verdictAt(
	look: Pick<RunningLook, 'efficacyZ' | 'futilityZ'>,
	z: number,
	sides: 1 | 2
): Verdict {
	if (look.efficacyZ !== null && z >= look.efficacyZ) return 'efficacy';
	if (look.efficacyZ !== null && sides === 2 && z <= -look.efficacyZ) return 'efficacy-below';
	if (look.futilityZ !== null && z <= look.futilityZ) return 'futility';
	return look.efficacyZ === null && look.futilityZ === null ? 'not-tested' : 'go-on';
}

/** The looks of a running trial that took part, with the z of the last one, for `stagewiseAnalysis`. */
export function stoppedAt(looks: readonly RunningLook[], z: number, sides: 1 | 2): Stopped {
	const last = looks[looks.length - 1];
	if (!last) throw new StatsError('bad-option', 'No look has been held yet.');
	const before = looks
		.slice(0, -1)
		.filter((look) => look.efficacyZ !== null && look.fraction < last.fraction);
	return {
		fractions: [...before.map((look) => look.fraction), last.fraction],
		upperBefore: before.map((look) => look.efficacyZ!),
		sides,
		z
	};
}

/**
 * What a running trial has to come, for conditional power: the planned looks beyond the current information, each
 * with the boundary it will have if its information is as planned.
 * @throws StatsError `bad-option` when no planned look is left
 */
export function interimOf(
	design: MonitoringDesign,
	maximumInformation: number,
	seen: readonly SeenLook[],
	z: number
): Interim {
	const current = Math.max(...seen.map((look) => look.information)) / maximumInformation;
	const remaining = design.plan.informationFractions.filter((t) => t - current > GROWTH);
	if (seen.length === 0 || remaining.length === 0)
		throw new StatsError(
			'bad-option',
			'Conditional power needs a look that was held and one that is planned beyond it.'
		);
	const all = runningBoundaries(design, maximumInformation, [
		...seen.map(({ information }) => ({ information })),
		...remaining.map((t, j) => ({
			information: t * maximumInformation,
			final: j === remaining.length - 1
		}))
	]);
	return {
		fraction: current,
		z,
		remaining,
		remainingZ: all.slice(seen.length).map((look) => look.efficacyZ ?? Infinity)
	};
}
