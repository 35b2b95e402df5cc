import type { StudyDefinition } from '../study/definition';
import { newSeed, randomStream, type Seed } from './generator.server';
import { hashOfList, makeList, type AllocationList } from './list.server';
import { stratumKeys, type StratumKey } from './strata';

/** A list holds this many places in each stratum where the definition plans no number of subjects. */
export const usualPlaces = 200;
const mostPlaces = 150_000;

/**
 * Places in each stratum: all the planned subjects, for nobody knows beforehand in which stratum they will come. It
 * says nothing of blocks.
 */
export function placesPerStratum(definition: StudyDefinition): number {
	const strata = stratumKeys(definition).length;
	return Math.max(
		1,
		Math.min(definition.plannedSubjects ?? usualPlaces, Math.floor(mostPlaces / strata))
	);
}

/** The levels a key stands for: {} for a list without factors. */
export function levelsOf(key: StratumKey): Record<string, string> {
	if (key === 'all') return {};
	return Object.fromEntries(
		key.split('|').map((part) => {
			const at = part.indexOf('=');
			return [part.slice(0, at), part.slice(at + 1)];
		})
	);
}

/** Which sizes blocks have follows from the seed, so that nobody who reads this program knows them. */
function sizesFrom(seed: Seed, ratioSum: number): number[] {
	const multiples = ratioSum >= 4 ? [1, 2, 3, 4] : [2, 3, 4, 5];
	return randomStream(seed, 'which sizes')
		.shuffled(multiples)
		.slice(0, 3)
		.map((multiple) => multiple * ratioSum)
		.sort((a, b) => a - b);
}

export interface StudyList {
	seed: Seed;
	blockSizes: number[];
	list: AllocationList;
	letters: { arm: string; letter: string }[];
}

/**
 * A study's list from a seed (a new one of the platform's secure generator). Each stratum is cut to the same number of
 * places, so that the count that everyone may read tells nothing of where blocks end. Arms get their letters by chance.
 */
export function listForStudy(definition: StudyDefinition, seed: Seed = newSeed()): StudyList {
	const places = placesPerStratum(definition);
	const arms = definition.arms.map(({ key, ratio }) => ({ key, ratio }));
	const blockSizes = sizesFrom(
		seed,
		arms.reduce((total, arm) => total + arm.ratio, 0)
	);
	const made = makeList({
		arms,
		strata: stratumKeys(definition),
		blockSizes,
		perStratum: places,
		seed
	});
	const entries = made.entries.filter((entry) => entry.position <= places);
	const shuffled = randomStream(seed, 'letters of arms').shuffled(arms.map((arm) => arm.key));
	return {
		seed,
		blockSizes,
		list: { method: made.method, entries, count: entries.length, hash: hashOfList(entries) },
		letters: shuffled.map((arm, at) => ({ arm, letter: String.fromCharCode(65 + at) }))
	};
}
