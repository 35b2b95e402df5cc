import Papa from 'papaparse';
import type { Problem } from '../problems';
import { readTableText, type Table } from './table';

const headBytes = 128 * 1024;

export type FileHead = { ok: true; table: Table } | { ok: false; problem: Problem };

/**
 * The names of the columns and the first rows. Faults of single rows are not told here: they are found, with all others,
 * by the check.
 */
export function readHead(bytes: Uint8Array): FileHead {
	const whole = bytes.length <= headBytes;
	const decoded = new TextDecoder('utf-8', { ignoreBOM: true }).decode(
		bytes.subarray(0, headBytes)
	);
	// The cut may have gone through a row, and through a character.
	const text = whole ? decoded : decoded.slice(0, decoded.lastIndexOf('\n') + 1);
	const read = readTableText(text);
	if (read.ok) return { ok: true, table: read.table };
	const ofTheFile = read.problems.find(({ row }) => row === null || row === 1);
	if (ofTheFile) return { ok: false, problem: ofTheFile.problem };
	const { data, meta } = Papa.parse<string[]>(text.replace(/^\uFEFF/, ''), {
		delimitersToGuess: [',', ';', '\t', '|'],
		skipEmptyLines: 'greedy',
		preview: 200
	});
	const [header = [], ...rows] = data;
	return {
		ok: true,
		table: {
			header: header.map((name) => name.trim()),
			rows: rows.map((cells, at) => ({ row: at + 2, cells })),
			delimiter: meta.delimiter
		}
	};
}

/** Whether every byte is UTF-8. */
export function isUtf8(bytes: Uint8Array): boolean {
	const decoder = new TextDecoder('utf-8', { fatal: true });
	try {
		for (let at = 0; at < bytes.length; at += 1024 * 1024)
			decoder.decode(bytes.subarray(at, at + 1024 * 1024), { stream: true });
		decoder.decode();
		return true;
	} catch {
		return false;
	}
}
