import { StatsError } from '../errors.js';

/** Plain order of code units, so that the reference level does not depend on the machine's language. */
function byCodeUnit(a: string, b: string): number {
	return a < b ? -1 : a > b ? 1 : 0;
}

/**
 * The levels of a category in the order they are coded, the first being the reference.
 *
 * `given` fixes the order; otherwise the levels found are sorted. `what` names the category in sentences.
 * Errors: `unknown-level`, `empty-level`, `single-level`, `duplicate-name`.
 */
export function levelsOf(
	found: readonly string[],
	given: readonly string[] | undefined,
	what: string
): string[] {
	const present = new Set(found);
	const levels = given ? [...given] : [...present].sort(byCodeUnit);
	const known = new Set(levels);
	if (known.size < levels.length) {
		throw new StatsError('duplicate-name', `The levels of ${what} name one level twice.`, {
			levels
		});
	}
	for (const level of present) {
		if (!known.has(level)) {
			throw new StatsError(
				'unknown-level',
				`“${level}” is not among the levels of ${what}: ${levels.map((l) => `“${l}”`).join(', ')}.`,
				{ level }
			);
		}
	}
	if (levels.length < 2) {
		throw new StatsError(
			'single-level',
			`There is only one level of ${what} (“${levels[0] ?? ''}”), so nothing can be compared. Leave it out.`,
			{ levels }
		);
	}
	for (const level of levels) {
		if (!present.has(level)) {
			throw new StatsError(
				'empty-level',
				`No usable row has the level “${level}” of ${what}; nothing can be estimated for it.`,
				{ level }
			);
		}
	}
	return levels;
}
