import { StatsError } from '../errors.js';
import type { Labels, Missing } from './columns.js';
import type { PlannedColumns } from './read-columns.js';
import { visitOrder } from './visit-order.js';

/** Rows left out for one reason; a row lacking two values is counted under both. */
export interface DroppedRows {
	/** `outcome`: the outcome is missing. `value`: the outcome is there and another value is missing. */
	reason: 'outcome' | 'value';
	/** The column, or `baseline`. */
	variable: string;
	rows: number;
}

export interface BaselineValues {
	/** By subject code, on the analysed scale; 0 where there is none. */
	values: Float64Array;
	/** 1 for a subject that has one. */
	known: Uint8Array;
	/** Rows that became a baseline value. */
	rows: number;
	/** Where they were found: a visit's label, or time 0. */
	at: string;
}

export interface Screening {
	/** 1 for a row the model uses. */
	use: Uint8Array;
	used: number;
	droppedOutcomes: number;
	/** Rows with an outcome that lack another value. */
	droppedRows: number;
	dropped: DroppedRows[];
	baseline: BaselineValues | null;
}

/** Whether row i is the baseline occasion: the first visit when visits are named, else time 0. */
function baselineTest(data: PlannedColumns): { at: string; test: (row: number) => boolean } {
	const { visit, time } = data;
	if (visit) {
		const first = visitOrder(visit, time)[0];
		const code = first === undefined ? -2 : visit.labels.indexOf(first);
		return { at: `visit ${first}`, test: (i) => visit.codes[i] === code };
	}
	return { at: 'time 0', test: (i) => !time.missing?.[i] && time.values[i] === 0 };
}

/** Takes the baseline rows out of `use`. Errors: `repeated-occasion`, `no-data`. */
function takeBaseline(data: PlannedColumns, use: Uint8Array): BaselineValues {
	const { at, test } = baselineTest(data);
	const subjects = data.subject.labels.length;
	const values = new Float64Array(subjects);
	const known = new Uint8Array(subjects);
	let rows = 0;
	for (let i = 0; i < data.rows; i++) {
		if (!use[i] || !test(i)) continue;
		const s = data.subject.codes[i]!;
		if (known[s]) {
			throw new StatsError(
				'repeated-occasion',
				`Subject “${data.subject.labels[s]}” has two outcomes at ${at}, the second in row ${i + 1}, so it is not clear which is the baseline.`,
				{ subject: data.subject.labels[s]!, row: i + 1 }
			);
		}
		values[s] = data.outcome.values[i]!;
		known[s] = 1;
		use[i] = 0;
		rows++;
	}
	if (rows === 0) {
		throw new StatsError(
			'no-data',
			`No row has an outcome at ${at}, so there is no baseline value to adjust for.`,
			{ rows: data.rows }
		);
	}
	return { values, known, rows, at };
}

function missingBaseline(subject: Labels, baseline: BaselineValues): Missing {
	return Uint8Array.from(subject.codes, (s) => (baseline.known[s] ? 0 : 1));
}

/**
 * Which rows the model uses: a missing outcome drops that occasion, a missing time, visit, group or covariate the row.
 *
 * All are counted, a row lacking its outcome there only. A baseline covariate takes its rows out of the outcomes.
 * Errors: `no-data`, `repeated-occasion`.
 */
export function screen(data: PlannedColumns): Screening {
	const { rows, outcome } = data;
	const use = new Uint8Array(rows).fill(1);
	let droppedOutcomes = 0;
	if (outcome.missing) {
		for (let i = 0; i < rows; i++) {
			if (!outcome.missing[i]) continue;
			use[i] = 0;
			droppedOutcomes++;
		}
	}
	const baseline = data.covariates.some((c) => c.kind === 'baseline')
		? takeBaseline(data, use)
		: null;
	const needed = [
		data.time,
		...(data.visit ? [data.visit] : []),
		...(data.group ? [data.group] : []),
		...data.covariates.map((c) => {
			if (c.kind === 'numeric') return c.numbers;
			if (c.kind === 'categorical') return c.labels;
			return { name: c.name, missing: missingBaseline(data.subject, baseline!) };
		})
	];
	const lacking = new Uint8Array(rows);
	const dropped: DroppedRows[] = [];
	if (droppedOutcomes > 0)
		dropped.push({ reason: 'outcome', variable: outcome.name, rows: droppedOutcomes });
	const counted = new Set<string>();
	for (const { name, missing } of needed) {
		if (!missing || counted.has(name)) continue;
		counted.add(name);
		let count = 0;
		for (let i = 0; i < rows; i++) {
			if (!use[i] || !missing[i]) continue;
			lacking[i] = 1;
			count++;
		}
		if (count > 0) dropped.push({ reason: 'value', variable: name, rows: count });
	}
	let droppedRows = 0;
	let used = 0;
	for (let i = 0; i < rows; i++) {
		droppedRows += lacking[i]!;
		if (lacking[i]) use[i] = 0;
		used += use[i]!;
	}
	if (used === 0) {
		throw new StatsError(
			'no-data',
			`None of the ${rows} rows has an outcome and every value the model needs.`,
			{ rows }
		);
	}
	return { use, used, droppedOutcomes, droppedRows, dropped, baseline };
}
