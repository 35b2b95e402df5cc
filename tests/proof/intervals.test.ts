import { expect, test } from 'vitest';
import { mixedModel, simulateReplicates, summariseReplicates, type Question } from '$lib/stats';

/** Seeds were fixed before the first run. Coverage is held to three Monte Carlo errors of what it should be. */
const replicates = 10_000;
const stays = [0, 0, 0, 0, 0];
const leaves = [0, 0.05, 0.1, 0.2, 0.3];
const slopes = (slope: number, dropout: number[]): Question => ({
	question: 'slope-difference',
	times: [0, 1, 2, 4, 6],
	variances: { residual: 4, level: 9, slope, levelSlopeCovariance: 0 },
	dropout: [dropout, dropout],
	mean: 'linear',
	commonBaseline: false
});

test.each<[string, Question]>([
	['level and slope, everybody stays', slopes(0.6, stays)],
	['level and slope, three in ten leave', slopes(0.6, leaves)]
])(
	'20 subjects, %s: intervals by REML and Kenward–Roger at 95 in 100 cover as often as they say',
	(what, question) => {
		const study = {
			question,
			subjects: [10, 10] as const,
			difference: 0.5,
			alpha: 0.05,
			sides: 2 as const,
			monitoring: null,
			maximumInformation: 1,
			seed: 20261201
		};
		const run = simulateReplicates(study, study.difference, mixedModel(question), [0, replicates]);
		const { coverage, failed, bias } = summariseReplicates(study, run);
		const error = Math.sqrt((0.95 * 0.05) / replicates);
		console.log(
			`${what}: coverage ${coverage.estimate.toFixed(4)} of ${replicates}, error ${error.toFixed(4)}, ${failed} failed`
		);
		expect(failed).toBe(0);
		expect(Math.abs(coverage.estimate - 0.95)).toBeLessThanOrEqual(3 * error);
		expect(Math.abs(bias.estimate)).toBeLessThanOrEqual(3 * bias.error);
	}
);
