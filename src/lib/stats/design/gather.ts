import { StatsError } from '../errors.js';
import type { PlannedColumns } from './read-columns.js';
import type { Screening } from './screening.js';

/** The rows in use, subject by subject, each subject's in the order of time. */
export interface Gathered {
	/** Where each row stood among the rows handed in. */
	rowOf: Int32Array;
	/** subjects + 1 long. */
	subjectStart: Int32Array;
	/** Subject codes of the data, in the order of first row in use. */
	subjectCodes: Int32Array;
	fewestPerSubject: number;
	mostPerSubject: number;
}

/** Sorts part of `rows`, short as a rule, by time, then visit, then place in the data. */
function sortByTime(rows: Int32Array, from: number, to: number, data: PlannedColumns): void {
	const { values } = data.time;
	const visits = data.visit?.codes;
	const before = (a: number, b: number) =>
		values[a]! - values[b]! || (visits ? visits[a]! - visits[b]! : 0) || a - b;
	for (let i = from + 1; i < to; i++) {
		if (before(rows[i - 1]!, rows[i]!) <= 0) continue;
		rows.subarray(from, to).sort(before);
		return;
	}
}

/** Subjects in the order of their first row in use, and their rows in the order of time. */
export function gather(data: PlannedColumns, { use, used }: Screening): Gathered {
	const { codes, labels } = data.subject;
	const position = new Int32Array(labels.length).fill(-1);
	const order: number[] = [];
	const sizes: number[] = [];
	for (let i = 0; i < data.rows; i++) {
		if (!use[i]) continue;
		const code = codes[i]!;
		let s = position[code]!;
		if (s < 0) {
			s = position[code] = order.length;
			order.push(code);
			sizes.push(0);
		}
		sizes[s]!++;
	}
	const subjectStart = new Int32Array(order.length + 1);
	sizes.forEach((size, s) => (subjectStart[s + 1] = subjectStart[s]! + size));
	const next = subjectStart.slice();
	const rowOf = new Int32Array(used);
	for (let i = 0; i < data.rows; i++) {
		if (!use[i]) continue;
		const s = position[codes[i]!]!;
		rowOf[next[s]!++] = i;
	}
	for (let s = 0; s < order.length; s++)
		sortByTime(rowOf, subjectStart[s]!, subjectStart[s + 1]!, data);
	return {
		rowOf,
		subjectStart,
		subjectCodes: Int32Array.from(order),
		fewestPerSubject: sizes.reduce((a, b) => Math.min(a, b), Infinity),
		mostPerSubject: sizes.reduce((a, b) => Math.max(a, b), 0)
	};
}

/**
 * Position of each subject's group among the levels; all 0 without a group.
 * Errors: `group-changes`.
 */
export function subjectGroups(
	data: PlannedColumns,
	{ rowOf, subjectStart, subjectCodes }: Gathered,
	position: Int32Array | null
): Int32Array {
	const groups = new Int32Array(subjectCodes.length);
	if (!data.group || !position) return groups;
	const { codes, labels, name } = data.group;
	for (let s = 0; s < subjectCodes.length; s++) {
		const first = codes[rowOf[subjectStart[s]!]!]!;
		for (let at = subjectStart[s]! + 1; at < subjectStart[s + 1]!; at++) {
			const row = rowOf[at]!;
			if (codes[row] === first) continue;
			const subject = data.subject.labels[subjectCodes[s]!]!;
			throw new StatsError(
				'group-changes',
				`Subject “${subject}” is in the group “${labels[first]}” and, in row ${row + 1}, in “${labels[codes[row]!]}” (column “${name}”); a subject belongs to one group.`,
				{ subject, row: row + 1, column: name }
			);
		}
		groups[s] = position[first]!;
	}
	return groups;
}
