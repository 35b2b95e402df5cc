import { StatsError } from '../errors.js';

/**
 * One variable, a value per row. Null is how a missing value is written; NaN never is, since it is what a
 * mistake elsewhere leaves behind. A `Float64Array` therefore holds no missing value.
 */
export type Column = Float64Array | readonly (number | string | null)[];

/** Variables by name, all of one length: row i of the data is entry i of each. */
export type Columns = Readonly<Record<string, Column>>;

/** Which rows lack a value; null when none does. */
export type Missing = Uint8Array | null;

/** A numeric variable; 0 stands where it is missing. */
export interface Numbers {
	name: string;
	values: Float64Array;
	missing: Missing;
}

/** A variable of labels: `codes[i]` is a position in `labels` (order of first appearance), −1 where missing. */
export interface Labels {
	name: string;
	codes: Int32Array;
	labels: string[];
	missing: Missing;
}

/** A column by its name. Errors: `unknown-column`. */
function columnOf(columns: Columns, name: string, what: string): Column {
	if (Object.hasOwn(columns, name)) return columns[name]!;
	const there = Object.keys(columns);
	throw new StatsError(
		'unknown-column',
		`The plan takes the ${what} from a column “${name}”, and the data have none of that name. They have ${there.length === 0 ? 'no column at all' : there.map((c) => `“${c}”`).join(', ')}.`,
		{ column: name, columns: there }
	);
}

/** The number of rows, the same in every column. Errors: `shape-mismatch`, `no-data`. */
export function rowCount(columns: Columns): number {
	const names = Object.keys(columns);
	const first = names[0];
	const rows = first === undefined ? 0 : columns[first]!.length;
	for (const name of names) {
		if (columns[name]!.length !== rows) {
			throw new StatsError(
				'shape-mismatch',
				`The column “${name}” has ${columns[name]!.length} rows and “${first}” has ${rows}; every column needs as many.`,
				{ column: name, rows: columns[name]!.length, expected: rows }
			);
		}
	}
	if (rows === 0) throw new StatsError('no-data', 'There are no rows to analyse.', { rows });
	return rows;
}

function refuseNotFinite(name: string, row: number, value: number): never {
	throw new StatsError(
		'not-finite',
		`The value of “${name}” in row ${row + 1} is ${value}; it must be finite.`,
		{ column: name, row: row + 1, value: String(value) }
	);
}

/**
 * A variable as numbers; `what` says in sentences what it is for.
 * A `Float64Array` is used as it is, not copied. Errors: `unknown-column`, `not-finite`, `wrong-kind`.
 */
export function numbersOf(columns: Columns, name: string, what: string): Numbers {
	const column = columnOf(columns, name, what);
	if (column instanceof Float64Array) {
		for (let i = 0; i < column.length; i++)
			if (!Number.isFinite(column[i]!)) refuseNotFinite(name, i, column[i]!);
		return { name, values: column, missing: null };
	}
	const values = new Float64Array(column.length);
	let missing: Missing = null;
	for (let i = 0; i < column.length; i++) {
		const value = column[i];
		if (typeof value === 'number') {
			if (!Number.isFinite(value)) refuseNotFinite(name, i, value);
			values[i] = value;
		} else if (value === null || value === undefined) {
			missing ??= new Uint8Array(column.length);
			missing[i] = 1;
		} else {
			throw new StatsError(
				'wrong-kind',
				`The value of “${name}” in row ${i + 1} is “${String(value)}”; the ${what} must be a number.`,
				{ column: name, row: i + 1, value: String(value) }
			);
		}
	}
	return { name, values, missing };
}

/**
 * A variable as labels; a number is the label it is written as, so 0 and 1 are two names.
 * Errors: `unknown-column`, `not-finite`, `wrong-kind`.
 */
export function labelsOf(columns: Columns, name: string, what: string): Labels {
	const column = columnOf(columns, name, what);
	const n = column.length;
	const codes = new Int32Array(n);
	const labels: string[] = [];
	const byValue = new Map<unknown, number>();
	const byLabel = new Map<string, number>();
	let missing: Missing = null;
	let last: unknown;
	let lastCode = -1;
	for (let i = 0; i < n; i++) {
		const value = column[i];
		if (value === null || value === undefined) {
			missing ??= new Uint8Array(n);
			missing[i] = 1;
			codes[i] = -1;
			continue;
		}
		// Rows of one subject mostly stand together, so the last answer is mostly the next.
		if (value !== last || lastCode < 0) {
			let code = byValue.get(value);
			if (code === undefined) {
				if (typeof value === 'number' && !Number.isFinite(value)) refuseNotFinite(name, i, value);
				if (typeof value !== 'number' && typeof value !== 'string') {
					throw new StatsError(
						'wrong-kind',
						`The value of “${name}” in row ${i + 1} is neither text nor a number; the ${what} needs a label.`,
						{ column: name, row: i + 1 }
					);
				}
				const label = String(value);
				code = byLabel.get(label);
				if (code === undefined) {
					code = labels.length;
					labels.push(label);
					byLabel.set(label, code);
				}
				byValue.set(value, code);
			}
			last = value;
			lastCode = code;
		}
		codes[i] = lastCode;
	}
	return { name, codes, labels, missing };
}
