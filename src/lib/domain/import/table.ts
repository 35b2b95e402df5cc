import Papa from 'papaparse';
import { problem, type Problem } from '../problems';

/** Limits of one imported file; stated on the screen that takes it. */
export const importLimits = {
	bytes: 50 * 1024 * 1024,
	rows: 200_000,
	columns: 200,
	cellCharacters: 500,
	subjectCharacters: 64
} as const;

/**
 * Row as a spreadsheet counts them: the header is row 1. `row` or `column` is null where the problem belongs to the
 * whole file.
 */
export type ImportProblem = { row: number | null; column: string | null; problem: Problem };

export type TableRow = { row: number; cells: string[] };

export type Table = {
	header: string[];
	rows: TableRow[];
	delimiter: string;
};

export type ReadTable = { ok: true; table: Table } | { ok: false; problems: ImportProblem[] };

const mostProblems = 100;

const whole = (reason: Problem): ReadTable => ({
	ok: false,
	problems: [{ row: null, column: null, problem: reason }]
});

function byteLength(text: string): number {
	return new TextEncoder().encode(text).length;
}

/** Gathers the pieces of a file, giving up as soon as it is too large or not UTF-8. */
async function gather(
	source: string | Iterable<string | Uint8Array> | AsyncIterable<string | Uint8Array>
): Promise<string | Problem> {
	if (typeof source === 'string') return source;
	const decoder = new TextDecoder('utf-8', { fatal: true, ignoreBOM: true });
	const parts: string[] = [];
	let bytes = 0;
	try {
		for await (const piece of source) {
			bytes += typeof piece === 'string' ? byteLength(piece) : piece.length;
			if (bytes > importLimits.bytes) return tooLarge();
			parts.push(typeof piece === 'string' ? piece : decoder.decode(piece, { stream: true }));
		}
		parts.push(decoder.decode());
	} catch (error) {
		if (error instanceof TypeError) return problem('IMPORT_ENCODING');
		throw error;
	}
	return parts.join('');
}

const tooLarge = () => problem('IMPORT_TOO_LARGE', { limit: importLimits.bytes / 1024 / 1024 });

/**
 * Reads delimited text: comma, semicolon, tab or bar, found by looking; with or without a byte order mark; cells may be
 * quoted. Blank lines are skipped but counted, so that row numbers are those of the spreadsheet.
 */
export async function readTable(
	source: string | Iterable<string | Uint8Array> | AsyncIterable<string | Uint8Array>
): Promise<ReadTable> {
	const gathered = await gather(source);
	if (typeof gathered !== 'string') return whole(gathered);
	return readTableText(gathered);
}

/** The same for text that is already here. */
export function readTableText(text: string): ReadTable {
	// A text of n UTF-16 units has at most 3n bytes; the exact count is taken only where it matters.
	if (text.length * 3 > importLimits.bytes && byteLength(text) > importLimits.bytes)
		return whole(tooLarge());
	// Bytes that were no UTF-8 have become this character on the way here.
	if (text.includes('\uFFFD')) return whole(problem('IMPORT_ENCODING'));

	const problems: ImportProblem[] = [];
	const report = (row: number | null, column: string | null, reason: Problem) => {
		if (problems.length < mostProblems) problems.push({ row, column, problem: reason });
	};
	let header: string[] | null = null;
	const rows: TableRow[] = [];
	let row = 0;
	let delimiter = ',';
	let stopped: Problem | null = null;

	Papa.parse<string[]>(text.replace(/^\uFEFF/, ''), {
		delimitersToGuess: [',', ';', '\t', '|'],
		skipEmptyLines: false,
		step: ({ data, errors, meta }, parser) => {
			row += 1;
			delimiter = meta.delimiter;
			if (errors.some((error) => error.type === 'Quotes')) report(row, null, problem('QUOTES'));
			if (data.length === 1 && data[0]?.trim() === '') return;
			if (header === null) {
				header = data.map((name) => name.trim());
				if (header.length > importLimits.columns)
					stopped = problem('IMPORT_TOO_MANY_COLUMNS', {
						columns: header.length,
						limit: importLimits.columns
					});
			} else if (rows.length >= importLimits.rows) {
				stopped = problem('IMPORT_TOO_MANY_ROWS', {
					limit: importLimits.rows.toLocaleString('en-GB')
				});
			} else {
				if (data.length !== header.length)
					report(row, null, problem('ROW_LENGTH', { cells: data.length, columns: header.length }));
				rows.push({ row, cells: data });
			}
			if (stopped) parser.abort();
		}
	});

	if (stopped) return whole(stopped);
	const names: string[] = header ?? [];
	checkHeader(names, report);
	if (rows.length === 0) report(null, null, problem('IMPORT_EMPTY'));
	if (problems.length > 0) return { ok: false, problems };
	return { ok: true, table: { header: names, rows, delimiter } };
}

function checkHeader(
	header: readonly string[],
	report: (row: number | null, column: string | null, reason: Problem) => void
): void {
	const seen = new Set<string>();
	header.forEach((name, at) => {
		const shown = name.slice(0, 60);
		if (name === '') report(1, null, problem('HEADER_BLANK', { position: at + 1 }));
		else if (seen.has(name)) report(1, shown, problem('HEADER_TWICE', { column: shown }));
		if (name.length > importLimits.cellCharacters)
			report(
				1,
				shown,
				problem('CELL_TOO_LONG', { length: name.length, limit: importLimits.cellCharacters })
			);
		if (name.includes('\0')) report(1, null, problem('CELL_NUL'));
		seen.add(name);
	});
}
