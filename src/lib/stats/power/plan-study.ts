import type { PlannedLook } from '../monitoring/types.js';
import { operatingCharacteristics, type Operating } from '../monitoring/operating.js';
import { powerOf, sampleSize, type SampleSize } from './sample-size.js';
import type { DesignPlan } from './read-plan.js';
import type { SimulatedStudy } from './simulate.js';
import type { Question } from './types.js';

interface Arms {
	arm0: number;
	arm1: number;
	total: number;
}

/** The answer to a design plan, by formula; plain data. */
export interface DesignResult {
	question: Question['question'];
	difference: number;
	alpha: number;
	sides: 1 | 2;
	/** Whole subjects; `unrounded` before rounding up in each arm. */
	subjects: Arms;
	unrounded: Arms;
	/** With the whole subjects. */
	power: number;
	/** Of the estimated difference. */
	variance: number;
	standardError: number;
	maximumInformation: number;
	inflationFactor: number;
	/** Independent outcomes the subjects are worth for the mean; null but for `mean-difference`. */
	effectiveSampleSize: number | null;
	looks: PlannedLook[] | null;
	/** Stopping under no difference and under the planned one; null without looks. */
	underNull: Operating | null;
	underDesign: Operating | null;
}

const arms = ([arm0, arm1]: readonly [number, number], total = arm0 + arm1): Arms => ({
	arm0,
	arm1,
	total
});

function sizeOf({ question, test, wanted }: DesignPlan): SampleSize {
	return 'power' in wanted
		? sampleSize(question, test, wanted.power)
		: powerOf(question, test, wanted.subjects);
}

/** Sample size or power of a written plan, by formula. */
export function planStudy(plan: DesignPlan): DesignResult {
	const { question, test } = plan;
	const size = sizeOf(plan);
	const { monitoring } = size;
	const drift = Math.min(40, Math.abs(test.difference) / Math.sqrt(size.variance));
	return {
		question: question.question,
		difference: test.difference,
		alpha: test.alpha,
		sides: test.sides,
		subjects: arms(size.subjects),
		unrounded: arms(size.armsUnrounded, size.totalUnrounded),
		power: size.power,
		variance: size.variance,
		standardError: Math.sqrt(size.variance),
		maximumInformation: size.maximumInformation,
		inflationFactor: size.inflationFactor,
		effectiveSampleSize: size.effectiveSampleSize,
		looks: monitoring?.looks ?? null,
		underNull: monitoring && operatingCharacteristics(monitoring, 0),
		underDesign: monitoring && operatingCharacteristics(monitoring, drift)
	};
}

/** The study that a plan's simulation plays, with the subjects its formula asks for. */
export function simulatedStudy(plan: DesignPlan, result: DesignResult): SimulatedStudy {
	const { question, test } = plan;
	return {
		question,
		subjects: [result.subjects.arm0, result.subjects.arm1],
		difference: test.difference,
		alpha: test.alpha,
		sides: test.sides,
		monitoring: sizeOf(plan).monitoring,
		maximumInformation: result.maximumInformation,
		confidence: plan.simulation?.confidence ?? 0.95,
		seed: plan.simulation?.seed ?? 0
	};
}
