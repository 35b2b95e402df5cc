import { describe, expect, test } from 'vitest';
import { normalUpperQuantile } from '../numeric/distribution.js';
import { randomStream } from '../numeric/random.js';
import { expectWithin } from '../reference/close.js';
import { boundariesOf, designMonitoring, withSides } from './boundaries.js';
import { conditionalPower } from './conditional-power.js';
import { stoppingProbabilities } from './crossing.js';
import { interimOf, runningBoundaries, stoppedAt, verdictAt, type SeenLook } from './running.js';
import { stagewiseAnalysis } from './stagewise.js';
import type { MonitoringPlan } from './types.js';

const plan: MonitoringPlan = {
	informationFractions: [1 / 3, 2 / 3, 1],
	sides: 1,
	alpha: 0.025,
	power: 0.9,
	efficacy: { kind: 'spending-obrien-fleming' }
};
const design = designMonitoring(plan);
const withFutility = designMonitoring({
	...plan,
	futility: { kind: 'spending-obrien-fleming', beta: 0.1 }
});
const maximum = 240;
const at = (...fractions: number[]): SeenLook[] =>
	fractions.map((t, k) => ({ information: t * maximum, final: k === fractions.length - 1 }));

describe('a trial that runs as planned has the boundaries of its plan', () => {
	test.each([
		['one-sided', design],
		['with futility', withFutility],
		['two-sided', designMonitoring({ ...plan, sides: 2, alpha: 0.05 })],
		['classical', designMonitoring({ ...plan, efficacy: { kind: 'pocock' } })]
	])('%s', (_, planned) => {
		const looks = runningBoundaries(planned, maximum, at(1 / 3, 2 / 3, 1));
		looks.forEach((look, k) => {
			expectWithin(look.efficacyZ!, planned.looks[k]!.efficacyZ!, 1e-9);
			expectWithin(look.cumulativeAlpha, planned.looks[k]!.cumulativeAlpha, 1e-12);
			if (planned.plan.futility) expectWithin(look.futilityZ!, planned.looks[k]!.futilityZ!, 1e-9);
		});
	});
});

/** α really spent by boundaries at the information the looks had. */
function spentBy(looks: ReturnType<typeof runningBoundaries>): number {
	const tested = looks.filter((look) => look.efficacyZ !== null);
	const boundaries = withSides(
		tested.map((look) => look.fraction),
		tested.map((look) => look.efficacyZ!),
		1
	);
	return stoppingProbabilities(boundaries, 0).upper.reduce((a, b) => a + b, 0);
}

test.each([
	['skipped', at(0.31, 1)],
	['added', at(0.2, 0.3, 0.45, 0.5, 0.9, 1)],
	['underrun', at(0.4, 0.83)],
	['overrun', at(0.4, 0.8, 1.27)]
])('a look %s: α is spent exactly at the information that came', (_, seen) => {
	const looks = runningBoundaries(design, maximum, seen);
	expectWithin(spentBy(looks), 0.025, 1e-11);
	expectWithin(looks.at(-1)!.cumulativeAlpha, 0.025, 1e-12);
});

test('a look before which nothing was planned does not change those already held', () => {
	const two = runningBoundaries(
		design,
		maximum,
		at(0.35, 0.7).map(({ information }) => ({ information }))
	);
	const three = runningBoundaries(design, maximum, at(0.35, 0.7, 1));
	expect(three.slice(0, 2)).toEqual(two);
});

test('information that fell spends nothing, and the next look has what is left', () => {
	const looks = runningBoundaries(design, maximum, at(0.4, 0.38, 0.4, 0.75, 1));
	expect(looks.map((look) => look.status)).toEqual([
		'spends',
		'no-new-information',
		'no-new-information',
		'spends',
		'spends'
	]);
	const without = runningBoundaries(design, maximum, at(0.4, 0.75, 1));
	expect([looks[0], looks[3], looks[4]]).toEqual(without);
	expect(looks[1]!.cumulativeAlpha).toBe(looks[0]!.cumulativeAlpha);
	expect(verdictAt(looks[1]!, 9, 1)).toBe('not-tested');
});

test('at a final look with less information, the rest of α stands alone', () => {
	const looks = runningBoundaries(design, maximum, at(0.7, 0.65));
	const rest = 0.025 - looks[0]!.cumulativeAlpha;
	expectWithin(looks[1]!.efficacyZ!, normalUpperQuantile(rest), 1e-12);
	expectWithin(looks[1]!.cumulativeAlpha, 0.025, 1e-15);
});

test('once full information was reached nothing is left, and early on nothing is within reach', () => {
	const looks = runningBoundaries(design, maximum, [
		{ information: 0.001 * maximum },
		{ information: 1.02 * maximum },
		{ information: 1.3 * maximum }
	]);
	expect(looks.map((look) => look.status)).toEqual(['beyond-reach', 'spends', 'nothing-left']);
	expect(looks[0]).toMatchObject({ efficacyZ: null, nominalPOneSided: 0, cumulativeAlpha: 0 });
});

test('what a z reached', () => {
	const looks = runningBoundaries(withFutility, maximum, at(1 / 3, 2 / 3, 1));
	expect(verdictAt(looks[1]!, 2.6, 1)).toBe('efficacy');
	expect(verdictAt(looks[1]!, 0.9, 1)).toBe('futility');
	expect(verdictAt(looks[1]!, 1.8, 1)).toBe('go-on');
	expect(verdictAt(looks[2]!, 1.9, 1)).toBe('futility');
	expect(verdictAt({ efficacyZ: 2, futilityZ: null }, -2.1, 2)).toBe('efficacy-below');
});

test('analysis at stopping and conditional power from what was really seen', () => {
	const seen = at(0.3, 0.55).map(({ information }) => ({ information }));
	const looks = runningBoundaries(design, maximum, seen);
	const stopped = stoppedAt(looks, 2.95, 1);
	expect(stopped.fractions).toEqual([0.3, 0.55]);
	expect(stagewiseAnalysis(stopped).p).toBeLessThan(looks[1]!.cumulativeAlpha);
	const interim = interimOf(design, maximum, seen, 1.4);
	expect(interim.remaining).toEqual([2 / 3, 1]);
	const all = runningBoundaries(design, maximum, at(0.3, 0.55, 2 / 3, 1));
	expect(interim.remainingZ).toEqual([all[2]!.efficacyZ, all[3]!.efficacyZ]);
	expect(conditionalPower(interim, 3)).toBeGreaterThan(conditionalPower(interim, 0));
	expect(() => interimOf(design, maximum, at(1), 1.4)).toThrow(/planned beyond/);
});

test('10,000 trials on normal increments: type I error within three Monte Carlo errors', () => {
	const trials = 10_000;
	const { upper, fractions } = boundariesOf(design, 'ignored');
	let [fixed, running] = [0, 0];
	for (let trial = 0; trial < trials; trial++) {
		const random = randomStream(20261201, trial);
		let score = 0;
		let before = 0;
		if (
			fractions.some((t, k) => {
				score += random.normal() * Math.sqrt(t - before);
				before = t;
				return score / Math.sqrt(t) >= upper[k]!;
			})
		)
			fixed++;
	}
	// A few schedules, one for each trial in turn; the information of a look says nothing of its z.
	const schedules = [at(0.42, 0.61, 1), at(0.2, 0.9, 0.94), at(0.5, 0.45, 1.1), at(0.7, 1.05)];
	const tested = schedules.map((seen) =>
		runningBoundaries(design, maximum, seen).filter((look) => look.efficacyZ !== null)
	);
	for (let trial = 0; trial < trials; trial++) {
		const random = randomStream(20261202, trial);
		let score = 0;
		let before = 0;
		if (
			tested[trial % tested.length]!.some((look) => {
				score += random.normal() * Math.sqrt(look.fraction - before);
				before = look.fraction;
				return score / Math.sqrt(look.fraction) >= look.efficacyZ!;
			})
		)
			running++;
	}
	const error = Math.sqrt((0.025 * 0.975) / trials);
	expectWithin(fixed / trials, 0.025, 3 * error, 'as planned');
	expectWithin(running / trials, 0.025, 3 * error, 'as it came');
});

test.each([
	[0, at(0.5), /maximum information/],
	[10, [{ information: -1 }], /look 1/],
	[10, [{ information: NaN }], /look 1/],
	[10, [{ information: 2, final: true }, { information: 3 }], /final one/]
])('maximum %d and looks %j are refused', (most, seen, sentence) => {
	expect(() => runningBoundaries(design, most, seen)).toThrow(sentence);
});
