import { StatsError } from '../errors.js';
import type { Labels } from './columns.js';

/** A category as the mean uses it: `levels[0]` is the reference; `position[code]` is −1 for a label not in use. */
export interface Factor {
	name: string;
	levels: string[];
	position: Int32Array;
}

const isNumber = (label: string) => label.trim() !== '' && Number.isFinite(Number(label));

/** Plain order of code units, so that the order does not depend on the machine's language. */
const byCodeUnit = (a: string, b: string) => (a < b ? -1 : a > b ? 1 : 0);

/** Whether every label is the text of a number. */
export function areNumbers(labels: readonly string[]): boolean {
	return labels.every(isNumber);
}

/** Labels in order: as numbers when all are numbers, else by code unit. A new array. */
export function sortLabels(labels: readonly string[]): string[] {
	const sorted = [...labels].sort(byCodeUnit);
	return areNumbers(labels) ? sorted.sort((a, b) => Number(a) - Number(b)) : sorted;
}

const list = (labels: readonly string[]) => labels.map((l) => `“${l}”`).join(', ');

function positionsOf(labels: readonly string[], levels: readonly string[]): Int32Array {
	const at = new Map(levels.map((level, i) => [level, i]));
	return Int32Array.from(labels, (label) => at.get(label) ?? -1);
}

/**
 * The levels of a category among the rows in use, in the order they are coded, the first the reference.
 *
 * `use[i]` is 1 for a row in use; `given` fixes the levels and their order, else those found are sorted;
 * `what` names the category in sentences, as “the group”.
 * Errors: `unknown-level`, `empty-level`, `single-level`, `duplicate-name`.
 */
export function factorOf(
	column: Labels,
	use: Uint8Array,
	given: readonly string[] | undefined,
	what: string
): Factor {
	const { codes, labels, name } = column;
	const rowWith = new Int32Array(labels.length).fill(-1);
	for (let i = 0; i < codes.length; i++)
		if (use[i] && rowWith[codes[i]!]! < 0) rowWith[codes[i]!] = i;
	const present = labels.filter((_, code) => rowWith[code]! >= 0);
	const levels = given ? [...given] : sortLabels(present);
	const repeated = levels.find((level, i) => levels.indexOf(level) !== i);
	if (repeated !== undefined) {
		throw new StatsError(
			'duplicate-name',
			`The levels of ${what} name “${repeated}” twice; each is named once.`,
			{ column: name, level: repeated }
		);
	}
	const known = new Set(levels);
	const stranger = present.find((label) => !known.has(label));
	if (stranger !== undefined) {
		const row = rowWith[labels.indexOf(stranger)]! + 1;
		throw new StatsError(
			'unknown-level',
			`The value of “${name}” in row ${row} is “${stranger}”, which is not among the levels of ${what}: ${list(levels)}.`,
			{ column: name, row, level: stranger }
		);
	}
	if (levels.length < 2) {
		throw new StatsError(
			'single-level',
			`There is only one level of ${what} in the usable rows (“${levels[0] ?? ''}” in the column “${name}”), so nothing can be compared. Leave it out.`,
			{ column: name, levels }
		);
	}
	const absent = levels.find((level) => !present.includes(level));
	if (absent !== undefined) {
		throw new StatsError(
			'empty-level',
			`No usable row has the level “${absent}” of ${what} (column “${name}”); nothing can be estimated for it.`,
			{ column: name, level: absent }
		);
	}
	return { name, levels, position: positionsOf(labels, levels) };
}
