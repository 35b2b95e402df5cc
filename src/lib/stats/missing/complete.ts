import { labelsOf, numbersOf, rowCount, type Column, type Columns } from '../design/columns.js';
import type { AnalysisPlan } from '../plan.js';
import { lastObserved, occasionsOf, type Due } from './occasions.js';

/** Columns in which every occasion after a subject's dropout has a row, its outcome yet to be imputed. */
export interface CompletedColumns {
	columns: Columns;
	/** 1 for a row whose outcome is to be imputed. */
	impute: Uint8Array;
	/** Subjects of whom no outcome was ever observed; they are left out, as the model leaves them out. */
	neverObserved: number;
}

/**
 * The columns with a row for every due occasion after a subject's last observed outcome.
 *
 * An occasion that has no row gets the mean time of its visit; covariates that are not known there are carried on from the
 * subject's last observed row. Gaps before the last observed outcome stay as they are. The outcome put in for the time being
 * is the subject's last. Errors: those of `occasionsOf`.
 */
export function completeColumns(
	columns: Columns,
	plan: AnalysisPlan,
	due: Due = 'every-visit'
): CompletedColumns {
	const occasions = occasionsOf(columns, plan, due);
	const rows = rowCount(columns);
	const subject = labelsOf(columns, plan.subject, 'subject');
	const visit = labelsOf(columns, plan.visit!, 'visit');
	const time = numbersOf(columns, plan.time, 'time');
	const outcome = numbersOf(columns, plan.outcome, 'outcome');
	const k = occasions.visits.length;
	const visitAt = visit.labels.map((label) => occasions.visits.indexOf(label));
	const last = occasions.subjects.map((_, s) => lastObserved(occasions, s));
	const lastRow = new Int32Array(last.length).fill(-1);
	const rowAt = new Map<number, number>();
	const sums = new Float64Array(k);
	const counts = new Float64Array(k);
	for (let i = 0; i < rows; i++) {
		if (visit.codes[i]! < 0) continue;
		const s = subject.codes[i]!;
		const v = visitAt[visit.codes[i]!]!;
		const missing = outcome.missing?.[i];
		if (!time.missing?.[i]) {
			sums[v]! += time.values[i]!;
			counts[v]!++;
		}
		if (!missing && v === last[s]) lastRow[s] = i;
		if (missing && !rowAt.has(s * k + v)) rowAt.set(s * k + v, i);
	}
	const full: Record<string, (number | string | null)[]> = {};
	for (const [name, column] of Object.entries(columns)) full[name] = Array.from(column as Column);
	const marks = new Array<number>(rows).fill(0);
	const carried = [
		...(plan.group ? [plan.group] : []),
		...plan.mean.covariates.flatMap((c) => (c.kind === 'baseline' ? [] : [c.name]))
	];
	let neverObserved = 0;
	occasions.subjects.forEach((label, s) => {
		if (last[s]! < 0) {
			neverObserved++;
			return;
		}
		for (let v = last[s]! + 1; v < k; v++) {
			if (occasions.state[s * k + v] !== 'missing' || counts[v] === 0) continue;
			let row = rowAt.get(s * k + v);
			if (row === undefined) {
				row = marks.length;
				for (const name of Object.keys(full)) full[name]!.push(null);
				full[plan.subject]![row] = label;
				full[plan.visit!]![row] = occasions.visits[v]!;
			}
			marks[row] = 1;
			full[plan.outcome]![row] = outcome.values[lastRow[s]!]!;
			full[plan.time]![row] ??= sums[v]! / counts[v]!;
			for (const name of carried) full[name]![row] ??= full[name]![lastRow[s]!]!;
		}
	});
	return { columns: full, impute: Uint8Array.from(marks), neverObserved };
}
