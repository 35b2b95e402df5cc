import { canonical, type Json } from '../cut/canonical';
import { fingerprintNow } from '../cut/fingerprint.server';
import { generatorMethod, randomStream, type Seed } from './generator.server';
import type { KitNumber } from './kit';
import { kitNumbers } from './list.server';

/**
 * Minimisation with a random element (Pocock and Simon, Biometrics 1975;31:103–115).
 *
 * For each arm it is asked how far apart the arms would be at the new subject's level of each factor if the subject went
 * there: the range of the numbers, each divided by its arm's ratio. The factors' ranges are added, each with the same
 * weight; the arms with the smallest sum are the best. With a chance q the arm is drawn in the study's ratio, whatever the
 * balance; otherwise it is one of the best, ties drawn in the ratio. q is such that the smallest arm, when it alone is best,
 * is given with the chance that was chosen: q = (1 − p)·R / (R − r). Unequal ratios by a random part that is drawn in the ratio:
 * after Han, Enas and McEntegart, Stat Med 2009;28:3329–3346 (from memory).
 *
 * The random numbers are made beforehand from the seed, two for each allocation, so that the whole row of allocations
 * follows from the seed and the subjects' levels. closed.minimised_arm does the same in the database; a test compares them.
 */
export const minimisationMethod = `minimisation/1 (range, equal weights, random element) with ${generatorMethod}`;

export type MinimisedArm = { key: string; ratio: number };
export type Levels = Readonly<Record<string, string>>;
export type Chance = { position: number; coin: number; draw: number };
export type KitOfArm = { position: number; arm: string; kit: KitNumber };

export type MinimisationPlan = {
	arms: readonly MinimisedArm[];
	/** The chance of the favoured arm, 0.55 to 0.95. */
	bestChance: number;
	/** Allocations there are numbers for. */
	places: number;
	seed: Seed;
};

export type Minimisation = {
	method: string;
	chances: Chance[];
	kits: KitOfArm[];
	randomBelow: number;
	count: number;
	hash: string;
};

const words = 2 ** 32;
/** Divisible by every ratio from 1 to 10: nothing is rounded. */
const whole = 2520;

/** Below this, a coin of 0 to 2³² − 1 draws the arm purely at random. */
export function randomBelow({ arms, bestChance }: Pick<MinimisationPlan, 'arms' | 'bestChance'>) {
	const sum = arms.reduce((total, arm) => total + arm.ratio, 0);
	const least = Math.min(...arms.map((arm) => arm.ratio));
	return Math.round((((1 - bestChance) * sum) / (sum - least)) * words);
}

/** Everything minimisation needs before the first subject: the random numbers, and kits of every arm in no order. */
export function makeMinimisation(plan: MinimisationPlan): Minimisation {
	const { arms, bestChance, places, seed } = plan;
	if (
		arms.length < 2 ||
		arms.some(({ ratio }) => !Number.isInteger(ratio) || ratio < 1 || ratio > 10)
	)
		throw new RangeError('Minimisation needs two arms or more, with ratios from 1 to 10');
	if (!(bestChance >= 0.55 && bestChance <= 0.95))
		throw new RangeError('The chance is 0.55 to 0.95');
	if (!Number.isInteger(places) || places < 1 || places * arms.length * 2 > 400_000)
		throw new RangeError(`Not a number of places: ${places}`);
	const stream = randomStream(seed, 'minimisation');
	const chances = Array.from({ length: places }, (_, at) => ({
		position: at + 1,
		coin: stream.below(words),
		draw: stream.below(words)
	}));
	// Twice as many as can be given of one arm: sites hold kits beside those that are given.
	const pool = randomStream(seed, 'kits of arms').shuffled(
		arms.flatMap((arm) => Array.from({ length: places * 2 }, () => arm.key))
	);
	const numbers = kitNumbers(seed, pool.length);
	const kits = pool.map((arm, at) => ({ position: at + 1, arm, kit: numbers[at] as KitNumber }));
	const below = randomBelow(plan);
	const content = { method: minimisationMethod, arms, randomBelow: below, chances, kits };
	return {
		method: minimisationMethod,
		chances,
		kits,
		randomBelow: below,
		count: places,
		hash: fingerprintNow(canonical(content as unknown as Json))
	};
}

/** How far apart the arms would be, for each arm in turn: the sums that decide. Whole numbers, in units of 1/2520. */
export function imbalances(
	arms: readonly MinimisedArm[],
	levels: Levels,
	before: readonly { levels: Levels; arm: string }[]
): number[] {
	const factors = Object.keys(levels);
	const groups =
		factors.length === 0
			? [before]
			: factors.map((factor) => before.filter((each) => each.levels[factor] === levels[factor]));
	return arms.map((candidate) =>
		groups.reduce((sum, group) => {
			const numbers = arms.map(
				(arm) =>
					(group.filter((each) => each.arm === arm.key).length + (arm === candidate ? 1 : 0)) *
					(whole / arm.ratio)
			);
			return sum + Math.max(...numbers) - Math.min(...numbers);
		}, 0)
	);
}

/** The arm a subject with these levels gets, after those before. */
export function minimisedArm(
	arms: readonly MinimisedArm[],
	below: number,
	levels: Levels,
	before: readonly { levels: Levels; arm: string }[],
	{ coin, draw }: Pick<Chance, 'coin' | 'draw'>
): string {
	const sums = imbalances(arms, levels, before);
	const least = Math.min(...sums);
	const pool = coin < below ? arms : arms.filter((_, at) => sums[at] === least);
	const total = pool.reduce((sum, arm) => sum + arm.ratio, 0);
	let left = Math.floor((draw * total) / words);
	for (const arm of pool) {
		if (left < arm.ratio) return arm.key;
		left -= arm.ratio;
	}
	throw new RangeError(`Not a draw: ${draw}`);
}
