import { StatsError } from '../errors.js';
import type { AnalysisPlan } from '../plan.js';
import type { Gathered } from './gather.js';
import type { PlannedColumns } from './read-columns.js';

/** Errors that give two rows of one subject at one occasion the correlation 1, and what the occasion is. */
function oneRowPer({ errors }: AnalysisPlan): 'time' | 'visit' | null {
	switch (errors.structure) {
		case 'serial':
			return errors.along;
		case 'serial-with-noise':
			return errors.along === 'visit' ? 'visit' : null;
		case 'toeplitz':
		case 'unstructured':
			return 'visit';
		default:
			return null;
	}
}

/**
 * Refuses two rows of one subject at one occasion where the errors of the plan allow one.
 * Errors: `repeated-occasion`.
 */
export function refuseRepeats(
	data: PlannedColumns,
	{ rowOf, subjectStart, subjectCodes }: Gathered,
	plan: AnalysisPlan
): void {
	const per = oneRowPer(plan);
	if (!per) return;
	const visit = per === 'visit' ? data.visit! : null;
	const seenBy = new Int32Array(visit?.labels.length ?? 0).fill(-1);
	const seenAt = new Int32Array(seenBy.length);
	for (let s = 0; s < subjectCodes.length; s++) {
		for (let at = subjectStart[s]!; at < subjectStart[s + 1]!; at++) {
			const row = rowOf[at]!;
			let other = -1;
			if (visit) {
				const code = visit.codes[row]!;
				if (seenBy[code] === s) other = seenAt[code]!;
				seenBy[code] = s;
				seenAt[code] = row;
			} else if (at > subjectStart[s]!) {
				const before = rowOf[at - 1]!;
				if (data.time.values[before] === data.time.values[row]) other = before;
			}
			if (other < 0) continue;
			const [first, second] = [Math.min(row, other) + 1, Math.max(row, other) + 1];
			const subject = data.subject.labels[subjectCodes[s]!]!;
			const occasion = visit
				? `the visit “${visit.labels[visit.codes[row]!]}” (column “${visit.name}”)`
				: `the time ${data.time.values[row]} (column “${data.time.name}”)`;
			throw new StatsError(
				'repeated-occasion',
				`Subject “${subject}” has two outcomes at ${occasion}, in rows ${first} and ${second}; ${plan.errors.structure} errors allow one.`,
				{ subject, rows: [String(first), String(second)] }
			);
		}
	}
}
