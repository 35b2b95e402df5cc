/**
 * Words of group-sequential monitoring. A look is an interim analysis; its fraction is its information (1/se² of
 * the tested contrast) over that planned for the end. z statistics are unitless; the drift is the expected z at
 * full information: effect × √(planned information). "Per side" means α for a one-sided plan, α/2 for a two-sided.
 */

/** Boundaries of fixed shape: c × fraction^(Δ − 1/2), with Δ = 1/2, 0 and `parameter`. */
export type ClassicalKind = 'pocock' | 'obrien-fleming' | 'wang-tsiatis';

/** Error spending functions; `spending-power` and `spending-gamma` need a `parameter`. */
export type SpendingKind =
	'spending-obrien-fleming' | 'spending-pocock' | 'spending-power' | 'spending-gamma';

export const classicalKinds: readonly ClassicalKind[] = [
	'pocock',
	'obrien-fleming',
	'wang-tsiatis'
];
export const spendingKinds: readonly SpendingKind[] = [
	'spending-obrien-fleming',
	'spending-pocock',
	'spending-power',
	'spending-gamma'
];

export interface EfficacyRule {
	kind: ClassicalKind | SpendingKind;
	/** Δ of Wang–Tsiatis, ρ of the power family, γ of the gamma family; null for the others. */
	parameter?: number | null;
}

export interface SpendingRule {
	kind: SpendingKind;
	parameter?: number | null;
}

/** Stopping for futility; non-binding: the efficacy boundary is computed as if it were not there. */
export type FutilityRule =
	| (SpendingRule & { beta: number })
	/** A z for each look but the last. */
	| { kind: 'fixed'; z: readonly number[]; beta: number };

export interface MonitoringPlan {
	/** Increasing, the last 1, at most 20. */
	informationFractions: readonly number[];
	/** A two-sided plan is symmetric and spends α/2 on each side. */
	sides: 1 | 2;
	/** Total type I error, both sides together. */
	alpha: number;
	efficacy: EfficacyRule;
	/** One-sided plans only. */
	futility?: FutilityRule | null;
	/** 1 − beta when there is futility. */
	power: number;
}

/** One look of a plan. A boundary is null where nothing can be reached: no error is spent there. */
export interface PlannedLook {
	fraction: number;
	/** Stop for efficacy at or above it (two-sided: also at or below its negative). */
	efficacyZ: number | null;
	/** Area above `efficacyZ`: what a one-sided p-value is compared with. */
	nominalPOneSided: number;
	/** Type I error spent up to here, both sides together, futility not obeyed. */
	cumulativeAlpha: number;
	/** Stop for futility at or below it; at the last look the efficacy boundary. Null without futility. */
	futilityZ: number | null;
}

/** A plan with its boundaries and the drift at which it has its power. */
export interface MonitoringDesign {
	plan: MonitoringPlan;
	looks: PlannedLook[];
	/** Expected z at full information under the alternative of the design. */
	drift: number;
	/** Drift of the test with one look and the same α per side and power. */
	fixedDrift: number;
	/** (drift / fixedDrift)²: maximum information relative to the test with one look. */
	inflationFactor: number;
}

/** Boundaries on the z scale; ±Infinity where a look cannot stop that way. */
export interface Boundaries {
	fractions: readonly number[];
	upper: readonly number[];
	lower: readonly number[];
}
