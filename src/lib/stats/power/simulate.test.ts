import { describe, expect, test } from 'vitest';
import { StatsError } from '../errors.js';
import { operatingCharacteristics } from '../monitoring/operating.js';
import { randomStream } from '../numeric/random.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { powerOf, sampleSize, type TestPlan } from './sample-size.js';
import {
	joinReplicates,
	simulateReplicates,
	summariseReplicates,
	type SimulatedStudy
} from './simulate.js';
import { summaryMeasures } from './summary-measures.js';
import { drawTrial, firstSubjects, layoutOf } from './trial.js';
import type { Question } from './types.js';

const times = [0, 1, 3, 6];
const stays = times.map(() => 0);
const slope: Question = {
	question: 'slope-difference',
	times,
	variances: { residual: 4, level: 9, slope: 0.2, levelSlopeCovariance: -0.5 },
	dropout: [stays, stays],
	mean: 'linear',
	commonBaseline: false
};
const test1: TestPlan = { difference: -0.35, alpha: 0.05, sides: 2, allocation: 0.5 };
const looks = {
	informationFractions: [1 / 3, 2 / 3, 1],
	efficacy: { kind: 'spending-obrien-fleming' as const }
};

function studyOf(question: Question, plan: TestPlan, power = 0.85): SimulatedStudy {
	const size = sampleSize(question, plan, power);
	return {
		question,
		subjects: size.subjects,
		difference: plan.difference,
		alpha: plan.alpha,
		sides: plan.sides,
		monitoring: size.monitoring,
		maximumInformation: size.maximumInformation,
		seed: 20261201
	};
}

describe('one simulated trial', () => {
	test('has the subjects, arms, visits and dropout asked for; first parts are balanced', () => {
		const gone = [0, 0.1, 0.3, 0.5];
		const data = drawTrial(
			layoutOf({ ...slope, dropout: [gone, stays] }),
			[400, 200],
			0,
			randomStream(1, 1)
		);
		const arms = new Map<number, number>();
		data.subject.forEach((s, i) => arms.set(s, data.arm[i]!));
		expect([...arms.values()].filter((a) => a === 1)).toHaveLength(200);
		expect(arms.size).toBe(600);
		const last = data.visit.filter((v, i) => v === 3 && data.arm[i] === 0).length;
		expectWithin(last / 400, 0.5, 4 * Math.sqrt(0.25 / 400));
		expect(data.visit.filter((v, i) => v === 3 && data.arm[i] === 1)).toHaveLength(200);
		const part = firstSubjects(data, 90);
		expect(part.subjects).toBe(90);
		expect(new Set(part.subject).size).toBe(90);
		expect(new Set(part.subject.filter((_, i) => part.arm[i] === 1)).size).toBe(30);
	});

	test('the difference moves arm 1 and nothing else', () => {
		const draw = (difference: number) =>
			drawTrial(layoutOf(slope), [3, 3], difference, randomStream(2, 9));
		const [without, with1] = [draw(0), draw(1)];
		without.outcome.forEach((y, i) => {
			expectWithin(with1.outcome[i]! - y, without.arm[i]! * without.time[i]!, 1e-12);
		});
	});
});

describe('simulation with the closed-form analysis', () => {
	const study = studyOf(slope, test1);
	const analyse = summaryMeasures(slope);

	test('any split into ranges gives the same bits', () => {
		const whole = simulateReplicates(study, -0.35, analyse, [0, 60]);
		const parts = [
			simulateReplicates(study, -0.35, analyse, [41, 60]),
			simulateReplicates(study, -0.35, analyse, [0, 7]),
			simulateReplicates(study, -0.35, analyse, [7, 41])
		];
		expect(joinReplicates(parts)).toEqual(whole);
		expect(() => joinReplicates([parts[0]!, parts[1]!])).toThrow(/without gaps/);
	});

	test('power, type I error, bias and coverage agree with the formula within 3.5 Monte Carlo errors', () => {
		const n = 2000;
		const run = (truth: number) =>
			summariseReplicates(study, simulateReplicates(study, truth, analyse, [0, n]));
		const [under, none] = [run(-0.35), run(0)];
		const formula = powerOf(slope, test1, study.subjects);
		// The t of the analysis is a little weaker than the formula's normal; with these numbers by less than 0.01.
		expectWithin(under.above.estimate, formula.power, 3.5 * under.above.error + 0.01);
		expectWithin(none.eitherSide.estimate, 0.05, 3.5 * none.eitherSide.error);
		for (const summary of [under, none]) {
			expectWithin(summary.bias.estimate, 0, 3.5 * summary.bias.error);
			expectWithin(summary.coverage.estimate, 0.95, 3.5 * summary.coverage.error);
			const deviation = summary.empiricalDeviation;
			expectWithin(deviation.estimate, Math.sqrt(formula.variance), 3.5 * deviation.error);
			expectRelative(summary.meanStandardError.estimate, deviation.estimate, 0.06);
		}
		expect(under).toMatchObject({ replicates: n, failed: 0, truth: -0.35 });
		expect(JSON.parse(JSON.stringify(under))).toEqual(under);
	});

	test('with looks: power and stopping times agree with exact integration', () => {
		const watched = studyOf(slope, { ...test1, looks });
		const n = 1000;
		const under = summariseReplicates(watched, simulateReplicates(watched, -0.35, analyse, [0, n]));
		const drift = 0.35 * Math.sqrt(watched.maximumInformation);
		const exact = operatingCharacteristics(watched.monitoring!, drift);
		expectWithin(under.above.estimate, exact.power, 3.5 * under.above.error + 0.01);
		under.stopping.forEach(({ share }, k) =>
			expectWithin(share.estimate, exact.stopping[k]!, 3.5 * share.error + 0.02, `look ${k + 1}`)
		);
		expect(under.stopping.reduce((sum, s) => sum + s.share.estimate, 0)).toBeCloseTo(1, 12);
		// Stopping early on a high estimate: the estimate at stopping lies too far out on average.
		expect(under.bias.estimate).toBeLessThan(0);
	});

	test('progress never falls and ends at 1; stopping is heard', () => {
		const told: number[] = [];
		simulateReplicates(study, 0, analyse, [0, 9], { onProgress: (f) => told.push(f) });
		expect(told).toEqual(told.toSorted((a, b) => a - b));
		expect(told.at(-1)).toBe(1);
		let asked = 0;
		const stop = () => ++asked > 3;
		expect(() => simulateReplicates(study, 0, analyse, [0, 9], { shouldStop: stop })).toThrow(
			expect.objectContaining({ code: 'stopped' })
		);
	});

	test('an analysis without an answer is counted, a fault is not hidden', () => {
		const refuses = () => {
			throw new StatsError('no-data', 'Nothing.');
		};
		const found = summariseReplicates(study, simulateReplicates(study, 0, refuses, [0, 5]));
		expect(found).toMatchObject({ replicates: 5, failed: 5, above: { estimate: 0 } });
		const breaks = () => {
			throw new TypeError('a fault');
		};
		expect(() => simulateReplicates(study, 0, breaks, [0, 5])).toThrow(TypeError);
	});
});

test.each<[string, Question, number]>([
	[
		'difference at a visit',
		{ ...slope, question: 'difference-at-visit', time: 6, mean: 'categorical' } as Question,
		2
	],
	...(['follow-up', 'change', 'ancova'] as const).map((analysis): [string, Question, number] => [
		analysis,
		{
			question: 'mean-difference',
			visits: 3,
			totalVariance: 4,
			icc: 0.5,
			analysis,
			baselineVisits: 2
		},
		0.8
	])
])(
	'%s: the summary-measures analysis has the variance of the formula',
	(_, question, difference) => {
		const study = studyOf(question, { ...test1, difference });
		const run = simulateReplicates(study, difference, summaryMeasures(question), [0, 1500]);
		const found = summariseReplicates(study, run);
		const formula = powerOf(question, { ...test1, difference }, study.subjects);
		const deviation = found.empiricalDeviation;
		expectWithin(
			deviation.estimate,
			Math.sqrt(formula.variance),
			3.5 * deviation.error + 0.01 * deviation.estimate
		);
		expectWithin(found.bias.estimate, 0, 3.5 * found.bias.error);
		expectWithin(found.above.estimate, formula.power, 3.5 * found.above.error + 0.01);
	}
);
