import { StatsError } from '../errors.js';
import {
	classicalKinds,
	spendingKinds,
	type EfficacyRule,
	type MonitoringPlan,
	type SpendingRule
} from './types.js';

export const MOST_LOOKS = 20;

function refuse(sentence: string, facts: Record<string, string | number> = {}): never {
	throw new StatsError('bad-option', sentence, facts);
}

/** Throws unless the fractions increase strictly from above 0 to exactly 1, at most 20 of them. */
export function checkFractions(fractions: readonly number[]): void {
	if (fractions.length < 1 || fractions.length > MOST_LOOKS)
		refuse(`A plan has 1 to ${MOST_LOOKS} looks, not ${fractions.length}.`);
	fractions.forEach((t, k) => {
		const before = fractions[k - 1] ?? 0;
		if (!(t > before) || !(t <= 1))
			refuse(
				`Information fractions must increase from above 0 to 1; number ${k + 1} is ${t} after ${before}.`,
				{ look: k + 1, fraction: t }
			);
	});
	const last = fractions[fractions.length - 1]!;
	if (last !== 1) refuse(`The last information fraction must be 1, not ${last}.`);
}

/** Throws unless a boundary's parameter is what its kind needs. */
export function checkRule(rule: EfficacyRule, of: 'efficacy' | 'futility'): void {
	const known: readonly string[] =
		of === 'efficacy' ? [...classicalKinds, ...spendingKinds] : spendingKinds;
	if (!known.includes(rule.kind))
		refuse(`The kind of ${of} must be one of ${known.join(', ')}, not ${rule.kind}.`);
	const needs = ['wang-tsiatis', 'spending-power', 'spending-gamma'].includes(rule.kind);
	const value = rule.parameter ?? null;
	if (!needs && value !== null)
		refuse(`The kind ${rule.kind} of ${of} takes no parameter, but ${value} was given.`);
	if (!needs) return;
	if (value === null || !Number.isFinite(value))
		refuse(`The kind ${rule.kind} of ${of} needs a finite number as its parameter.`);
	const [from, to] =
		rule.kind === 'spending-gamma'
			? [-100, 100]
			: rule.kind === 'spending-power'
				? [0.01, 100]
				: [-5, 5];
	if (value < from || value > to)
		refuse(
			`The parameter of ${rule.kind} must lie between ${from} and ${to}; ${value} was given.`,
			{ parameter: value }
		);
}

/** α for a one-sided plan, α/2 for a two-sided one. */
export const perSide = (plan: Pick<MonitoringPlan, 'alpha' | 'sides'>) => plan.alpha / plan.sides;

/** Throws a `StatsError` with a sentence unless the plan can be computed. */
export function checkPlan(plan: MonitoringPlan): void {
	checkFractions(plan.informationFractions);
	if (plan.sides !== 1 && plan.sides !== 2) refuse(`A plan has 1 or 2 sides, not ${plan.sides}.`);
	const level = perSide(plan);
	if (!(level >= 1e-12 && level < 0.5))
		refuse(
			`Alpha must leave between 1e-12 and 0.5 on each side; ${plan.alpha} on ${plan.sides} side(s) does not.`,
			{ alpha: plan.alpha }
		);
	checkRule(plan.efficacy, 'efficacy');
	if (!(plan.power > level && plan.power <= 1 - 1e-9))
		refuse(`Power must lie above alpha per side (${level}) and below 1; ${plan.power} was given.`, {
			power: plan.power
		});
	const futility = plan.futility ?? null;
	if (!futility) return;
	if (plan.sides !== 1)
		refuse('Futility boundaries are for one-sided plans; this one has two sides.');
	if (!(futility.beta > 0 && futility.beta < 1))
		refuse(`Beta must lie between 0 and 1; ${futility.beta} was given.`, { beta: futility.beta });
	if (Math.abs(futility.beta + plan.power - 1) > 1e-9)
		refuse(
			`With futility, power is 1 − beta: power ${plan.power} and beta ${futility.beta} do not agree.`,
			{ power: plan.power, beta: futility.beta }
		);
	if (futility.kind === 'fixed') {
		const looks = plan.informationFractions.length - 1;
		if (futility.z.length !== looks || !futility.z.every(Number.isFinite))
			refuse(
				`Fixed futility needs a finite z for each look but the last: ${looks} here, not ${futility.z.length}.`
			);
	} else checkRule(futility as SpendingRule, 'futility');
}
