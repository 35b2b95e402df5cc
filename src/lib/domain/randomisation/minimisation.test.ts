import { createHash } from 'node:crypto';
import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { randomStream } from './generator.server';
import {
	imbalances,
	makeMinimisation,
	minimisedArm,
	randomBelow,
	type Levels,
	type MinimisedArm
} from './minimisation.server';

const seedOf = (text: string) => createHash('sha256').update(text).digest('hex');
const armsOf = (ratios: number[]): MinimisedArm[] =>
	ratios.map((ratio, at) => ({ key: `arm-${at}`, ratio }));

/** Subjects one after the other, their levels by chance. */
function played(
	arms: MinimisedArm[],
	bestChance: number,
	subjects: number,
	levelsAt: (n: number, below: (n: number) => number) => Levels,
	seed: string
): { levels: Levels; arm: string }[] {
	const { chances, randomBelow: below } = makeMinimisation({
		arms,
		bestChance,
		places: subjects,
		seed
	});
	const stream = randomStream(seed, 'levels');
	const given: { levels: Levels; arm: string }[] = [];
	for (const chance of chances) {
		const levels = levelsAt(given.length, (n) => stream.below(n));
		given.push({ levels, arm: minimisedArm(arms, below, levels, given, chance) });
	}
	return given;
}

describe('minimisation', () => {
	it('adds the ranges that each arm would leave, at the subject’s own levels', () => {
		const arms = armsOf([1, 1]);
		const on = (sex: string, age: string, arm: number) => ({
			levels: { sex, age },
			arm: `arm-${arm}`
		});
		const before = [on('f', 'old', 0), on('f', 'young', 0), on('m', 'old', 1), on('f', 'old', 0)];
		// By hand, for an old woman: f 3:0, old 2:1. To arm 0: |4−0| + |3−1| = 6. To arm 1: |3−1| + |2−2| = 2.
		expect(imbalances(arms, { sex: 'f', age: 'old' }, before)).toEqual([6 * 2520, 2 * 2520]);
		// A young man: m 0:1, young 1:0. To either: |1−1| + |2−0| = 2 and |0−2| + |1−1| = 2.
		expect(imbalances(arms, { sex: 'm', age: 'young' }, before)).toEqual([2 * 2520, 2 * 2520]);
		// Ratio 2:1, one factor, 2 and 1 given: exactly even, so the next 1 unit is 1/2 or 1.
		const uneven = [on('f', 'old', 0), on('f', 'old', 0), on('f', 'old', 1)];
		expect(imbalances(armsOf([2, 1]), { sex: 'f' }, uneven)).toEqual([1260, 2520]);
	});

	it('is the chosen chance for the smallest arm, and leaves the others their part of the ratio', () => {
		// q = (1 − p)·R/(R − r): for 1:1 and p = 0.8 it is 0.4, so that the best gets 0.6 + 0.4/2 = 0.8.
		const q = (ratios: number[], bestChance: number) =>
			randomBelow({ arms: armsOf(ratios), bestChance }) / 2 ** 32;
		expect(q([1, 1], 0.8)).toBeCloseTo(0.4, 8);
		expect(q([1, 1, 1], 0.8)).toBeCloseTo(0.3, 8);
		for (const ratios of [
			[1, 1],
			[2, 1],
			[3, 2, 1],
			[1, 1, 1]
		]) {
			const sum = ratios.reduce((a, b) => a + b, 0);
			const least = Math.min(...ratios);
			expect(1 - q(ratios, 0.75) + (q(ratios, 0.75) * least) / sum).toBeCloseTo(0.75, 8);
		}
	});

	it('follows from its seed', () => {
		const plan = { arms: armsOf([1, 1]), bestChance: 0.8, places: 50, seed: seedOf('one') };
		expect(makeMinimisation(plan)).toEqual(makeMinimisation(plan));
		expect(makeMinimisation({ ...plan, seed: seedOf('two') }).hash).not.toBe(
			makeMinimisation(plan).hash
		);
		expect(makeMinimisation({ ...plan, bestChance: 0.7 }).hash).not.toBe(
			makeMinimisation(plan).hash
		);
		const levels = (_: number, below: (n: number) => number) => ({ sex: below(2) ? 'f' : 'm' });
		expect(played(plan.arms, 0.8, 50, levels, plan.seed)).toEqual(
			played(plan.arms, 0.8, 50, levels, plan.seed)
		);
	});

	it('has kits of every arm in no order, with the same numbers whatever the arms are called', () => {
		const plan = { arms: armsOf([1, 1]), bestChance: 0.8, places: 400, seed: seedOf('kits') };
		const { kits } = makeMinimisation(plan);
		expect(new Set(kits.map((each) => each.kit)).size).toBe(1600);
		for (const arm of plan.arms)
			expect(kits.filter((each) => each.arm === arm.key)).toHaveLength(800);
		const swapped = makeMinimisation({ ...plan, arms: [...plan.arms].reverse() }).kits;
		expect(swapped.map((each) => each.kit)).toEqual(kits.map((each) => each.kit));
		expect(swapped.every((each, at) => each.arm !== kits[at]!.arm)).toBe(true);
		// Whether a kit's number is above its neighbour's says nothing of its arm: five standard errors of a fair share.
		const sorted = [...kits].sort((a, b) => (a.kit < b.kit ? -1 : 1));
		const alike = sorted.filter((each, at) => at > 0 && each.arm === sorted[at - 1]!.arm).length;
		expect(Math.abs(alike / (sorted.length - 1) - 0.5)).toBeLessThan(
			(5 * 0.5) / Math.sqrt(sorted.length)
		);
	});

	/*
	 * Two equal arms and no factor: minimisation is then Efron’s biased coin. Zhao, Weng, Wu and Palesch (Pharm Stat
	 * 2012;11:39–48, table III) give for a coin of 0.7, over 5,000 simulated studies: standard deviation of the final
	 * imbalance 1.731 at 20 subjects and 1.760 at 80; balance at 29.8 % and 28.7 % of all steps.
	 */
	it.each([
		[20, 1.731, 0.298],
		[80, 1.76, 0.287]
	])('without factors balances %i subjects as published', (subjects, published, balanced) => {
		const studies = 1500;
		let squares = 0;
		let even = 0;
		for (let study = 0; study < studies; study++) {
			const given = played(armsOf([1, 1]), 0.7, subjects, () => ({}), seedOf(`efron ${study}`));
			let difference = 0;
			for (const { arm } of given) {
				difference += arm === 'arm-0' ? 1 : -1;
				if (difference === 0) even += 1;
			}
			squares += difference ** 2;
		}
		// The standard error of a standard deviation is 1.8 % over 1,500 normal values, here somewhat more.
		expect(Math.abs(Math.sqrt(squares / studies) / published - 1)).toBeLessThan(0.07);
		expect(Math.abs(even / (studies * subjects) - balanced)).toBeLessThan(0.012);
	});

	it.each([[[1, 1]], [[1, 1, 1]], [[2, 1]], [[3, 2, 1]]])(
		'in ratio %j keeps every level of every factor near the ratio, far nearer than chance does',
		(ratios) => {
			const arms = armsOf(ratios);
			const sum = ratios.reduce((a, b) => a + b, 0);
			const levelsAt = (_: number, below: (n: number) => number): Levels => ({
				site: `0${below(4)}`,
				sex: below(2) ? 'f' : 'm',
				age: ['young', 'middle', 'old'][below(3)] as string
			});
			const worst = (bestChance: number) => {
				const given = played(arms, bestChance, 600, levelsAt, seedOf(`margins ${ratios}`));
				let furthest = 0;
				for (const factor of ['site', 'sex', 'age'])
					for (const level of new Set(given.map((each) => each.levels[factor]))) {
						const here = given.filter((each) => each.levels[factor] === level);
						for (const arm of arms)
							furthest = Math.max(
								furthest,
								Math.abs(
									here.filter((each) => each.arm === arm.key).length -
										(here.length * arm.ratio) / sum
								)
							);
					}
				return furthest;
			};
			// By pure chance, three standard deviations of a level of 300 in two equal arms would be 26.
			expect(worst(0.9)).toBeLessThan(9);
		}
	);

	it('gives unequal arms their part of the ratio from the first subjects on', () => {
		const studies = 3000;
		const first = Array(12).fill(0);
		for (let study = 0; study < studies; study++)
			played(armsOf([2, 1]), 0.8, 12, () => ({}), seedOf(`ratio ${study}`)).forEach(
				({ arm }, at) => {
					if (arm === 'arm-0') first[at] += 1;
				}
			);
		const average = first.reduce((a, b) => a + b, 0) / (studies * 12);
		expect(Math.abs(average - 2 / 3)).toBeLessThan(0.02);
	});

	it('never gives an arm that the study has not', () => {
		fc.assert(
			fc.property(
				fc.array(fc.integer({ min: 1, max: 10 }), { minLength: 2, maxLength: 6 }),
				fc.integer({ min: 0, max: 2 ** 32 - 1 }),
				fc.integer({ min: 0, max: 2 ** 32 - 1 }),
				(ratios, coin, draw) => {
					const arms = armsOf(ratios);
					const below = randomBelow({ arms, bestChance: 0.8 });
					expect(arms.map((arm) => arm.key)).toContain(
						minimisedArm(arms, below, { a: 'b' }, [], { coin, draw })
					);
				}
			)
		);
	});

	it('is refused for a plan that makes no sense', () => {
		const plan = { arms: armsOf([1, 1]), bestChance: 0.8, places: 10, seed: seedOf('x') };
		for (const wrong of [
			{ arms: armsOf([1]) },
			{ arms: armsOf([0, 1]) },
			{ arms: armsOf([1.5, 1]) },
			{ arms: armsOf([11, 1]) },
			{ bestChance: 0.5 },
			{ bestChance: 1 },
			{ bestChance: Number.NaN },
			{ places: 0 },
			{ places: 1e7 },
			{ seed: 'secret' }
		])
			expect(() => makeMinimisation({ ...plan, ...wrong }), JSON.stringify(wrong)).toThrow(
				RangeError
			);
	});
});
