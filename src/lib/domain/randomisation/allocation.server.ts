import type { StudyDefinition } from '../study/definition';
import { newSeed, randomStream, type Seed } from './generator.server';
import { hashOfList, makeList, type AllocationList } from './list.server';
import { makeMinimisation, type Minimisation, type MinimisedArm } from './minimisation.server';
import { stratumKeys, type StratumKey } from './strata';

/** A list holds this many places in each stratum where the definition plans no number of subjects. */
export const usualPlaces = 200;
const mostPlaces = 150_000;
/** Of the favoured arm under minimisation, where nothing else was chosen. */
export const usualChance = 0.8;

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

/** What a list was made from besides its seed and sizes: kept with it, for the protocol may change. */
export type ListSource = {
	arms: { key: string; ratio: number }[];
	strata: StratumKey[];
	places: number;
	/** Minimisation only. */
	bestChance?: number;
};

export interface StudyList {
	seed: Seed;
	source: ListSource;
	blockSizes: number[];
	list: AllocationList;
	letters: { arm: string; letter: string }[];
}

export interface StudyMinimisation {
	seed: Seed;
	source: ListSource & { bestChance: number };
	made: Minimisation;
	letters: { arm: string; letter: string }[];
}

const bareArms = (definition: StudyDefinition): MinimisedArm[] =>
	definition.arms.map(({ key, ratio }) => ({ key, ratio }));

/** Arms get their letters by chance. */
function lettersFrom(seed: Seed, arms: readonly { key: string }[]) {
	return randomStream(seed, 'letters of arms')
		.shuffled(arms.map((arm) => arm.key))
		.map((arm, at) => ({ arm, letter: String.fromCharCode(65 + at) }));
}

/** The list again, from what was recorded of it. Each stratum is cut to the same number of places. */
export function listFrom(seed: Seed, blockSizes: number[], source: ListSource): AllocationList {
	const { arms, strata, places } = source;
	const made = makeList({ arms, strata, blockSizes, perStratum: places, seed });
	const entries = made.entries.filter((entry) => entry.position <= places);
	return { method: made.method, entries, count: entries.length, hash: hashOfList(entries) };
}

/**
 * A study's list from a seed (a new one of the platform's secure generator). All strata have the same number of places,
 * so that the count that everyone may read tells nothing of where blocks end.
 */
export function listForStudy(definition: StudyDefinition, seed: Seed = newSeed()): StudyList {
	const arms = bareArms(definition);
	const source = { arms, strata: stratumKeys(definition), places: placesPerStratum(definition) };
	const blockSizes = sizesFrom(
		seed,
		arms.reduce((total, arm) => total + arm.ratio, 0)
	);
	return {
		seed,
		source,
		blockSizes,
		list: listFrom(seed, blockSizes, source),
		letters: lettersFrom(seed, arms)
	};
}

export const minimisationFrom = (seed: Seed, source: ListSource): Minimisation =>
	makeMinimisation({
		arms: source.arms,
		places: source.places,
		bestChance: source.bestChance ?? usualChance,
		seed
	});

/** Random numbers and kits for a study that minimises: as many as subjects are planned, and half as many again. */
export function minimisationForStudy(
	definition: StudyDefinition,
	bestChance: number,
	seed: Seed = newSeed()
): StudyMinimisation {
	const arms = bareArms(definition);
	const planned = Math.ceil((definition.plannedSubjects ?? usualPlaces) * 1.5);
	const places = Math.max(1, Math.min(planned, Math.floor(mostPlaces / (2 * arms.length))));
	const source = { arms, strata: stratumKeys(definition), places, bestChance };
	return { seed, source, made: minimisationFrom(seed, source), letters: lettersFrom(seed, arms) };
}
