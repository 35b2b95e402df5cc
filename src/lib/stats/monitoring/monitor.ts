import { boundariesOf, designMonitoring } from './boundaries.js';
import {
	conditionalPower,
	conditionalPowerFinalOnly,
	predictivePower,
	predictivePowerFinalOnly,
	trendOf,
	type Interim
} from './conditional-power.js';
import { operatingCharacteristics, type Operating } from './operating.js';
import type { WrittenMonitoringPlan } from './read-plan.js';
import { verdictAt, type Verdict } from './running.js';
import { repeatedInterval, stagewiseAnalysis } from './stagewise.js';
import type { PlannedLook } from './types.js';

/** Conditional power by what is assumed of the rest of the trial. */
export interface PowerUnder {
	/** The effect for which the test with one look has its power: drift `fixedDrift`. */
	design: number;
	/** The same effect with the maximum information inflated for the looks: drift `drift`. */
	designInflated: number;
	/** The effect seen so far. */
	trend: number;
	/** No effect. */
	none: number;
}

/** What a look gave, beside the boundaries. The last six speak as if the trial stopped at it. */
export interface ObservedLook {
	observed: { look: number; z: number; fraction: number; reached: Verdict };
	/** Of crossing for efficacy at any remaining look; null at the last look. */
	conditionalPower: PowerUnder | null;
	/** Of crossing at the last look alone. */
	conditionalPowerFinalOnly: PowerUnder | null;
	predictivePower: number | null;
	predictivePowerFinalOnly: number | null;
	/** One-sided, upper side. */
	stagewiseP: number;
	medianUnbiasedDrift: number;
	driftInterval: [number, number];
	confidence: number;
	/** Repeated interval of the drift at the look; null where its boundary cannot be reached. */
	repeatedDriftInterval: [number, number] | null;
}

export interface MonitoringResult extends Partial<ObservedLook> {
	looks: (Omit<PlannedLook, 'futilityZ'> & { futilityZ?: number | null })[];
	drift: number;
	fixedDrift: number;
	inflationFactor: number;
	underNull: Operating;
	underDesign: Operating;
}

/** Everything that can be said of a written monitoring plan, as plain data: no NaN, no Infinity. */
export function monitor(plan: WrittenMonitoringPlan): MonitoringResult {
	const design = designMonitoring(plan);
	const result: MonitoringResult = {
		looks: design.looks.map(({ futilityZ, ...look }) =>
			plan.sides === 1 ? { ...look, futilityZ } : look
		),
		drift: design.drift,
		fixedDrift: design.fixedDrift,
		inflationFactor: design.inflationFactor,
		underNull: operatingCharacteristics(design, 0),
		underDesign: operatingCharacteristics(design, design.drift)
	};
	if (!plan.observed) return result;
	const { look, z } = plan.observed;
	const { fractions, upper } = boundariesOf(design, 'ignored');
	const fraction = fractions[look - 1]!;
	const interim: Interim | null =
		look < fractions.length
			? { fraction, z, remaining: fractions.slice(look), remainingZ: upper.slice(look) }
			: null;
	const under = (power: (interim: Interim, drift: number) => number): PowerUnder | null =>
		interim && {
			design: power(interim, design.fixedDrift),
			designInflated: power(interim, design.drift),
			trend: power(interim, trendOf(interim)),
			none: power(interim, 0)
		};
	const stopping = stagewiseAnalysis(
		{
			fractions: fractions.slice(0, look),
			upperBefore: upper.slice(0, look - 1),
			sides: plan.sides,
			z
		},
		plan.confidence
	);
	const planned = design.looks[look - 1]!;
	return {
		...result,
		observed: { look, z, fraction, reached: verdictAt(planned, z, plan.sides) },
		conditionalPower: under(conditionalPower),
		conditionalPowerFinalOnly: under(conditionalPowerFinalOnly),
		predictivePower: interim && predictivePower(interim),
		predictivePowerFinalOnly: interim && predictivePowerFinalOnly(interim),
		stagewiseP: stopping.p,
		medianUnbiasedDrift: stopping.medianUnbiasedDrift,
		driftInterval: stopping.driftInterval,
		confidence: stopping.confidence,
		repeatedDriftInterval: repeatedInterval(z, fraction, planned.efficacyZ)
	};
}
