import { describe, expect, test } from 'vitest';
import { randomStream } from '../numeric/random.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { mixedModel } from './mixed-model.js';
import { powerOf, sampleSize, type TestPlan } from './sample-size.js';
import { simulateReplicates, summariseReplicates, type SimulatedStudy } from './simulate.js';
import { summaryMeasures } from './summary-measures.js';
import { drawTrial, layoutOf } from './trial.js';
import type { Question } from './types.js';

const times = [0, 1, 3, 6];
const stays = times.map(() => 0);
const slope: Question = {
	question: 'slope-difference',
	times,
	variances: { residual: 4, level: 9, slope: 0.6, levelSlopeCovariance: -0.5 },
	dropout: [stays, stays],
	mean: 'linear',
	commonBaseline: false
};
const means = (analysis: 'follow-up' | 'change'): Question => ({
	question: 'mean-difference',
	visits: 3,
	totalVariance: 4,
	icc: 0.5,
	analysis,
	baselineVisits: 2
});

describe('complete balanced data: the mixed model and the summary measures give one answer', () => {
	test.each<[string, Question]>([
		['slopes', slope],
		['means after treatment', means('follow-up')],
		['changes from before', means('change')]
	])('%s', (_, question) => {
		const data = drawTrial(layoutOf(question), [20, 14], 0.4, randomStream(6, 2));
		const [model, measures] = [mixedModel(question)(data), summaryMeasures(question)(data)];
		expectWithin(model.estimate, measures.estimate, 1e-6 * measures.se);
		expectRelative(model.se, measures.se, 1e-6);
		expectRelative(model.df, measures.df, 1e-6);
	});
});

test.each<[string, Question, number]>([
	[
		'slopes with dropout and a common baseline',
		{ ...slope, dropout: [[0, 0.1, 0.2, 0.4], stays], commonBaseline: true } as Question,
		0.9
	],
	[
		'a difference at a visit among categories, with dropout',
		{
			...slope,
			question: 'difference-at-visit',
			time: 6,
			mean: 'categorical',
			dropout: [stays, [0, 0.1, 0.2, 0.3]]
		} as Question,
		4
	],
	[
		'means adjusted for the mean before',
		{ ...means('follow-up'), analysis: 'ancova' } as Question,
		0.9
	]
])(
	'%s: simulated with the model, power and variance are those of the formula',
	(_, question, difference) => {
		const plan: TestPlan = { difference, alpha: 0.05, sides: 2, allocation: 0.5 };
		const { subjects, maximumInformation } = sampleSize(question, plan, 0.85);
		const study: SimulatedStudy = {
			question,
			subjects,
			difference,
			alpha: 0.05,
			sides: 2,
			monitoring: null,
			maximumInformation,
			seed: 20261220
		};
		const run = simulateReplicates(study, difference, mixedModel(question), [0, 400]);
		const found = summariseReplicates(study, run);
		const formula = powerOf(question, plan, subjects);
		const deviation = found.empiricalDeviation;
		expect(found.failed).toBe(0);
		expectWithin(deviation.estimate, Math.sqrt(formula.variance), 3.5 * deviation.error);
		expectWithin(found.bias.estimate, 0, 3.5 * found.bias.error);
		expectWithin(found.coverage.estimate, 0.95, 3.5 * found.coverage.error);
		expectWithin(found.above.estimate, formula.power, 3.5 * found.above.error + 0.02);
	}
);
