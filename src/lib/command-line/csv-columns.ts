import Papa from 'papaparse';
import type { Columns } from '$lib/stats';
import { BadInput } from './bad-input';

/** How a column is read: as numbers, or as labels exactly as they stand. */
export type ColumnKind = 'number' | 'label';

type Cells = (number | string | null)[];

const decimal = /^[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?$/i;

/** Empty and NA, with or without blanks around them, are how a missing value is written. */
function cellOf(
	raw: string,
	kind: ColumnKind,
	column: string,
	line: number
): number | string | null {
	const cell = raw.trim();
	if (cell === '' || cell === 'NA') return null;
	if (kind === 'label') return cell;
	if (decimal.test(cell)) return Number(cell);
	throw new BadInput(
		`Line ${line}: “${cell}” in the column “${column}” is not a number. A missing value is left empty or written NA.`
	);
}

/** Which cell of a line holds each column asked for. */
function placesOf(header: readonly string[], wanted: ReadonlyMap<string, ColumnKind>) {
	const names = header.map((name) => name.trim());
	const twice = names.find((name, i) => name !== '' && names.indexOf(name) !== i);
	if (twice !== undefined) throw new BadInput(`The first line names the column “${twice}” twice.`);
	return [...wanted].map(([name, kind]) => {
		const at = names.indexOf(name);
		if (at < 0) {
			throw new BadInput(
				`The plan needs a column “${name}”, and the file has none of that name. It has ${names.map((n) => `“${n}”`).join(', ')}.`
			);
		}
		return { name, kind, at, cells: [] as Cells };
	});
}

const newlinesIn = (cells: readonly string[]) =>
	cells.reduce((sum, cell) => (cell.includes('\n') ? sum + cell.split('\n').length - 1 : sum), 0);

/**
 * The columns asked for out of a CSV file (comma, first line the names, RFC 4180 quotes), row by row in order.
 *
 * A line with more or fewer cells than the first is refused by its number, counted from 1; blank lines are passed over.
 */
export function csvColumns(csv: string, wanted: ReadonlyMap<string, ColumnKind>): Columns {
	let width = 0;
	let line = 1;
	let places: ReturnType<typeof placesOf> | null = null;
	Papa.parse<string[]>(csv.replace(/^\uFEFF/, ''), {
		delimiter: ',',
		step({ data, errors }) {
			const [fault] = errors;
			if (fault) throw new BadInput(`Line ${line}: a quotation mark is not closed.`);
			const here = line;
			line += 1 + newlinesIn(data);
			if (data.length === 1 && data[0]!.trim() === '') return;
			if (!places) {
				places = placesOf(data, wanted);
				width = data.length;
				return;
			}
			if (data.length !== width) {
				throw new BadInput(
					`Line ${here} has ${data.length} ${data.length === 1 ? 'cell' : 'cells'} and the first line names ${width} columns.`
				);
			}
			for (const place of places)
				place.cells.push(cellOf(data[place.at]!, place.kind, place.name, here));
		}
	});
	if (!places) throw new BadInput('The file of data is empty.');
	const found: ReturnType<typeof placesOf> = places;
	return Object.fromEntries(found.map(({ name, cells }) => [name, cells]));
}
