import { daysBetween, findPlainDate, type PlainDate } from '../../time/dates';
import { problem, type Problem } from '../problems';
import { checkMapping, readNumber, type ImportMapping } from './mapping';
import { importLimits, type ImportProblem, type Table, type TableRow } from './table';

export type ImportedSubject = {
	subject: string;
	/** Row of the file where the subject first stands. */
	row: number;
	/** The day time is counted from; null where time is a number. */
	anchor: PlainDate | null;
	characteristic: string | null;
	allocation: string | null;
	/** In the order of the mapping's covariates that do not vary; null where the cell is empty. */
	covariates: (number | string | null)[];
};

export type ImportedRow = {
	row: number;
	subject: string;
	/** In the mapping's unit; days from the anchor where time is a date. */
	time: number;
	date: PlainDate | null;
	visit: string | null;
	/** In the order of the mapping's measures; null where the outcome is missing. */
	values: (number | null)[];
	/** In the order of the mapping's covariates that vary. */
	covariates: (number | string | null)[];
};

export type CheckedRows = {
	/** The first problems, in the order of the rows; `problemCount` says how many there are in all. */
	problems: ImportProblem[];
	problemCount: number;
	subjects: ImportedSubject[];
	rows: ImportedRow[];
	/** Measured values, and cells that stand for a missing one. */
	valueCount: number;
	missingCount: number;
	timeUnit: 'day' | 'week' | 'month' | 'year';
};

const usualProblems = 1000;
const mostMagnitude = 1e12;
const shown = (text: string) => (text.length > 40 ? `${text.slice(0, 40)}…` : text);

/**
 * Checks every row against the mapping and turns it into subjects and rows. Nothing is half-taken: where there is a
 * problem, the caller imports nothing and shows `problems`.
 */
export function checkRows(
	table: Table,
	mapping: ImportMapping,
	options: { masked: boolean; mostProblems?: number }
): CheckedRows {
	const problems = checkMapping(table.header, mapping, options);
	const result: CheckedRows = {
		problems,
		problemCount: problems.length,
		subjects: [],
		rows: [],
		valueCount: 0,
		missingCount: 0,
		timeUnit: mapping.time.kind === 'number' ? mapping.time.unit : 'day'
	};
	if (problems.length > 0) return result;
	new Checker(table, mapping, result, options.mostProblems ?? usualProblems).run();
	return result;
}

type Read<T> = { value: T } | null;

class Checker {
	private readonly at: Map<string, number>;
	private readonly missing: Set<string>;
	private readonly subjects = new Map<string, ImportedSubject>();
	private readonly seen = new Map<string, number>();
	private readonly mapping: ImportMapping;
	private readonly table: Table;
	private readonly result: CheckedRows;
	private readonly fixed: ImportMapping['covariates'];
	private readonly varying: ImportMapping['covariates'];

	constructor(
		table: Table,
		mapping: ImportMapping,
		result: CheckedRows,
		private readonly mostProblems: number
	) {
		this.table = table;
		this.mapping = mapping;
		this.result = result;
		this.at = new Map(table.header.map((name, at) => [name, at]));
		this.missing = new Set(mapping.missing);
		this.fixed = mapping.covariates.filter((each) => !each.varies);
		this.varying = mapping.covariates.filter((each) => each.varies);
	}

	run(): void {
		for (const row of this.table.rows) this.take(row);
		this.countDays();
		this.result.subjects = [...this.subjects.values()];
	}

	private report(row: number, column: string | null, reason: Problem): null {
		this.result.problemCount += 1;
		if (this.result.problems.length < this.mostProblems)
			this.result.problems.push({ row, column, problem: reason });
		return null;
	}

	/** The cell's text without blanks around it, or null when it cannot be kept. */
	private cell(row: TableRow, column: string, limit: number): string | null {
		const text = (row.cells[this.at.get(column) ?? -1] ?? '').trim();
		if (text.length > limit)
			return this.report(row.row, column, problem('CELL_TOO_LONG', { length: text.length, limit }));
		if (/\p{Cc}/u.test(text) || !text.isWellFormed())
			return this.report(row.row, column, problem('CELL_NUL'));
		return text;
	}

	private number(row: TableRow, column: string, decimals: number | null): Read<number | null> {
		const text = this.cell(row, column, importLimits.cellCharacters);
		if (text === null) return null;
		if (text === '' || this.missing.has(text)) return { value: null };
		const read = readNumber(text, this.mapping.decimalSign);
		if (read === null) {
			const code = /^[+-]?(nan|inf|infinity)$/i.test(text)
				? 'CELL_NOT_FINITE'
				: 'CELL_NOT_A_NUMBER';
			return this.report(row.row, column, problem(code, { text: shown(text) }));
		}
		if (!Number.isFinite(read.value) || Math.abs(read.value) > mostMagnitude)
			return this.report(row.row, column, problem('CELL_TOO_LARGE', { text: shown(text) }));
		if (decimals !== null && read.decimals > decimals)
			return this.report(
				row.row,
				column,
				problem('TOO_MANY_DECIMALS', { text: shown(text), decimals })
			);
		return { value: read.value };
	}

	private date(row: TableRow, column: string): PlainDate | null {
		const text = this.cell(row, column, importLimits.cellCharacters);
		if (text === null) return null;
		if (text === '') return this.report(row.row, column, problem('TIME_EMPTY'));
		const date = findPlainDate(text);
		if (date !== null) return date;
		const code = /^\d{4}-\d{2}-\d{2}$/.test(text) ? 'DATE_NOT_REAL' : 'DATE_SHAPE';
		return this.report(row.row, column, problem(code, { text: shown(text) }));
	}

	private time(row: TableRow): { time: number; date: PlainDate | null } | null {
		const { time } = this.mapping;
		if (time.kind === 'date') {
			const date = this.date(row, time.column);
			// Counted once every subject's first date is known.
			return date === null ? null : { time: 0, date };
		}
		const read = this.number(row, time.column, null);
		if (read === null) return null;
		if (read.value === null) return this.report(row.row, time.column, problem('TIME_EMPTY'));
		return { time: read.value, date: null };
	}

	private take(row: TableRow): void {
		const before = this.result.problemCount;
		const { mapping } = this;
		const subject = this.cell(row, mapping.subject, importLimits.subjectCharacters);
		if (subject === '') this.report(row.row, mapping.subject, problem('SUBJECT_EMPTY'));
		const time = this.time(row);
		const visit = mapping.visit === undefined ? '' : this.cell(row, mapping.visit, 100);
		const values = mapping.measures.map((each) => this.number(row, each.column, each.decimals));
		const covariates = this.varying.map((each) => this.covariate(row, each));
		if (subject) this.takeSubject(row, subject);
		if (subject && time && visit !== null) this.checkTwice(row, subject, time, visit);
		if (this.result.problemCount > before || !subject || !time) return;

		const kept = values.map((each) => each?.value ?? null);
		for (const value of kept)
			if (value === null) this.result.missingCount += 1;
			else this.result.valueCount += 1;
		this.result.rows.push({
			row: row.row,
			subject,
			...time,
			visit: visit || null,
			values: kept,
			covariates: covariates.map((each) => each?.value ?? null)
		});
	}

	private covariate(
		row: TableRow,
		each: ImportMapping['covariates'][number]
	): Read<number | string | null> {
		if (each.kind === 'number') return this.number(row, each.column, null);
		const text = this.cell(row, each.column, 100);
		return text === null ? null : { value: text === '' || this.missing.has(text) ? null : text };
	}

	/** What belongs to the subject must be the same in each of its rows. */
	private takeSubject(row: TableRow, subject: string): void {
		const { characteristic, allocation, time } = this.mapping;
		const texts = [characteristic?.column, allocation].map((column) =>
			column === undefined ? null : this.cell(row, column, 100) || null
		);
		const covariates = this.fixed.map((each) => this.covariate(row, each)?.value ?? null);
		const anchor =
			time.kind === 'date' && time.anchor.kind === 'column'
				? this.date(row, time.anchor.column)
				: null;
		const known = this.subjects.get(subject);
		if (!known) {
			this.subjects.set(subject, {
				subject,
				row: row.row,
				anchor,
				characteristic: texts[0] ?? null,
				allocation: texts[1] ?? null,
				covariates
			});
			return;
		}
		const pairs: [string | undefined, unknown, unknown][] = [
			[characteristic?.column, known.characteristic, texts[0] ?? null],
			[allocation, known.allocation, texts[1] ?? null],
			...this.fixed.map((each, at): [string, unknown, unknown] => [
				each.column,
				known.covariates[at],
				covariates[at]
			])
		];
		if (time.kind === 'date' && time.anchor.kind === 'column')
			pairs.push([time.anchor.column, known.anchor, anchor]);
		for (const [column, before, value] of pairs)
			if (column !== undefined && before !== value)
				this.report(
					row.row,
					column,
					problem('CHARACTERISTIC_CHANGES', {
						subject,
						value: shown(String(value ?? '')),
						before: shown(String(before ?? '')),
						first: known.row
					})
				);
	}

	private checkTwice(
		row: TableRow,
		subject: string,
		time: { time: number; date: PlainDate | null },
		visit: string
	): void {
		const key = `${subject}\n${time.date ?? time.time}\n${visit}`;
		const first = this.seen.get(key);
		if (first === undefined) this.seen.set(key, row.row);
		else this.report(row.row, this.mapping.time.column, problem('ROW_TWICE', { subject, first }));
	}

	/** Dates become days from the anchor, or from each subject's earliest date. */
	private countDays(): void {
		const { time } = this.mapping;
		if (time.kind !== 'date') return;
		if (time.anchor.kind === 'first-date')
			for (const row of this.result.rows) {
				const subject = this.subjects.get(row.subject);
				if (subject && row.date && (subject.anchor === null || row.date < subject.anchor))
					subject.anchor = row.date;
			}
		for (const row of this.result.rows) {
			const anchor = this.subjects.get(row.subject)?.anchor;
			if (anchor && row.date) row.time = daysBetween(anchor, row.date);
		}
	}
}
