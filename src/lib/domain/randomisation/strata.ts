import type { StudyDefinition } from '../study/definition';

/** One combination of levels within which the arms are kept in balance: 'kidney-function=below-45|site=02'. */
export type StratumKey = string;

/** The key of a combination; the factors in alphabetical order, so that one combination has one key. */
export function stratumKey(levels: Readonly<Record<string, string>>): StratumKey {
	const factors = Object.keys(levels).sort();
	return factors.length === 0
		? 'all'
		: factors.map((factor) => `${factor}=${levels[factor]}`).join('|');
}

/** Every combination of a study's stratification factors, and of its sites where those count as one. */
export function stratumKeys(
	definition: Pick<StudyDefinition, 'strata' | 'stratifyBySite' | 'sites'>
): StratumKey[] {
	const factors = definition.strata.map((stratum) => ({
		key: stratum.key,
		levels: stratum.levels.map((level) => level.key)
	}));
	if (definition.stratifyBySite)
		factors.push({ key: 'site', levels: definition.sites.map((site) => site.code) });
	let combinations: Record<string, string>[] = [{}];
	for (const factor of factors)
		combinations = combinations.flatMap((before) =>
			factor.levels.map((level) => ({ ...before, [factor.key]: level }))
		);
	return combinations.map(stratumKey).sort();
}
