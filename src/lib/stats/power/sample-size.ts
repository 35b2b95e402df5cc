import { StatsError } from '../errors.js';
import { designMonitoring } from '../monitoring/boundaries.js';
import { operatingCharacteristics } from '../monitoring/operating.js';
import type { MonitoringDesign, MonitoringPlan } from '../monitoring/types.js';
import { normalBelow, normalUpperQuantile } from '../numeric/distribution.js';
import { checkQuestion } from './check.js';
import { meanVarianceFactor, varianceOfDifference } from './information.js';
import type { Question } from './types.js';

/** The test that is planned: with looks, when `looks` says how they are spaced and bounded. */
export interface TestPlan {
	/** To be detected; its sign is the direction of benefit in a one-sided test. */
	difference: number;
	/** Total type I error. */
	alpha: number;
	sides: 1 | 2;
	/** Share of subjects in arm 1. */
	allocation: number;
	looks?: Pick<MonitoringPlan, 'informationFractions' | 'efficacy' | 'futility'> | null;
}

export interface SampleSize {
	/** [arm 0, arm 1], rounded up. */
	subjects: [number, number];
	totalUnrounded: number;
	/** [arm 0, arm 1]. */
	armsUnrounded: [number, number];
	/** Power with the rounded numbers. */
	power: number;
	/** Variance of the estimated difference with the rounded numbers. */
	variance: number;
	/** 1/variance: the information to be reached at the end. */
	maximumInformation: number;
	/** Subjects with looks over subjects without; 1 without looks. */
	inflationFactor: number;
	/** Independent outcomes the rounded numbers are worth for the mean; null but for `mean-difference`. */
	effectiveSampleSize: number | null;
	monitoring: MonitoringDesign | null;
}

function check(test: TestPlan): void {
	const refuse = (sentence: string): never => {
		throw new StatsError('bad-option', sentence);
	};
	if (!Number.isFinite(test.difference) || test.difference === 0)
		refuse(`The difference to be detected must be finite and not 0: ${test.difference}.`);
	if (!(test.alpha > 0 && test.alpha / test.sides < 0.5))
		refuse(`Alpha must leave between 0 and 0.5 on each side, not ${test.alpha}.`);
	if (!(test.allocation > 0 && test.allocation < 1))
		refuse(`The share of arm 1 must lie between 0 and 1, not ${test.allocation}.`);
}

function monitoringOf(test: TestPlan, power: number): MonitoringDesign | null {
	if (!test.looks) return null;
	const { alpha, sides } = test;
	return designMonitoring({ ...test.looks, alpha, sides, power });
}

/** Up to the next whole subject, a rounding error above one not counted. */
const roundedUp = (n: number) => Math.max(1, Math.ceil(n * (1 - 1e-12)));

/**
 * How many subjects give a test its power: N = (z₁₋ₐ + z_power)² × N·Var(difference) / difference², rounded up in
 * each arm, multiplied by the inflation factor of the looks.
 *
 * Variances are taken as known and the statistic as normal; with few subjects, check it by simulation.
 * Source: Diggle, Heagerty, Liang & Zeger (2002), section 2.4; Fitzmaurice, Laird & Ware (2011), chapter 20.
 */
export function sampleSize(question: Question, test: TestPlan, power: number): SampleSize {
	checkQuestion(question);
	check(test);
	const level = test.alpha / test.sides;
	if (!(power > level && power < 1))
		throw new StatsError(
			'bad-option',
			`Power must lie above alpha per side (${level}) and below 1, not ${power}.`
		);
	const monitoring = monitoringOf(test, power);
	const inflation = monitoring?.inflationFactor ?? 1;
	const fixed = normalUpperQuantile(level) + normalUpperQuantile(1 - power);
	const f = test.allocation;
	const unit = varianceOfDifference(question, [1 - f, f]);
	const total = (fixed ** 2 * inflation * unit) / test.difference ** 2;
	if (!(total <= 1e12))
		throw new StatsError('out-of-range', `This would take ${total.toPrecision(3)} subjects.`);
	const arms: [number, number] = [total * (1 - f), total * f];
	return {
		...powerOf(question, test, [roundedUp(arms[0]), roundedUp(arms[1])], monitoring),
		totalUnrounded: total,
		armsUnrounded: arms
	};
}

/** What given numbers of subjects can tell: power (of crossing in the right direction), variance, information. */
export function powerOf(
	question: Question,
	test: TestPlan,
	subjects: readonly [number, number],
	/** Left out: made for a power of 0.9, which only its drift depends on, or 1 − beta with futility. */
	given?: MonitoringDesign | null
): SampleSize {
	checkQuestion(question);
	check(test);
	if (!subjects.every((n) => n >= 1 && n <= 1e12))
		throw new StatsError(
			'bad-option',
			`Each arm needs at least one subject: ${subjects.join(' and ')}.`
		);
	const monitoring =
		given === undefined
			? monitoringOf(test, test.looks?.futility ? 1 - test.looks.futility.beta : 0.9)
			: given;
	const variance = varianceOfDifference(question, subjects);
	const drift = Math.abs(test.difference) / Math.sqrt(variance);
	const power = monitoring
		? drift > 40
			? 1
			: operatingCharacteristics(monitoring, drift).power
		: normalBelow(drift - normalUpperQuantile(test.alpha / test.sides));
	const total = subjects[0] + subjects[1];
	return {
		subjects: [...subjects],
		totalUnrounded: total,
		armsUnrounded: [...subjects],
		power,
		variance,
		maximumInformation: 1 / variance,
		inflationFactor: monitoring?.inflationFactor ?? 1,
		effectiveSampleSize:
			question.question === 'mean-difference'
				? total / meanVarianceFactor({ ...question, analysis: 'follow-up' })
				: null,
		monitoring
	};
}
