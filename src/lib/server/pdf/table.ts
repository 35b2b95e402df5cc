import type { TableNode } from '$lib/report/tree';
import { drop, leading, MARGIN, WIDTH, type Element, type Flow } from './flow';
import { ink, type Style } from './type';

const PAD = 6;
const ABOVE = 4;
const SPACE = 8;
/** A hair of room, so that a word as wide as its column is not cut by rounding. */
const HAIR = 0.5;
const body: Style = { size: 9.5, tabular: true };
const caption: Style = { size: 11, weight: 'bold' };
const head: Style = { size: 9, colour: ink.muted };

/** Column widths that add up to the page's: numbers keep to one line, words share what is left. */
export function columnWidths(
	wanted: readonly { least: number; natural: number }[],
	width: number,
	widen: number
): number[] {
	const least = wanted.reduce((sum, c) => sum + c.least, 0);
	if (least > width) return wanted.map((c) => (c.least * width) / least);
	const more = wanted.reduce((sum, c) => sum + Math.max(0, c.natural - c.least), 0);
	const spare = width - least;
	if (more <= spare) {
		return wanted.map((c, i) => Math.max(c.least, c.natural) + (i === widen ? spare - more : 0));
	}
	return wanted.map((c) => c.least + (Math.max(0, c.natural - c.least) * spare) / more);
}

const heightOf = (cells: string[][], style: Style) =>
	Math.max(...cells.map((c) => c.length)) * leading(style.size) + 2 * ABOVE;

/** Everything about a table but its place: columns, cells in lines, heights. */
function layOut(flow: Flow, node: TableNode) {
	const { type } = flow;
	const longest = (text: string, style: Style) =>
		Math.max(
			...type
				.spell(text)
				.split(' ')
				.map((w) => type.width(w, style))
		);
	const numeric = node.columns.some((c) => c.numeric);
	const wanted = node.columns.map((column, i) => {
		const cells = node.rows.map((row) => row[i] ?? '');
		const natural = Math.max(...cells.map((t) => type.width(type.spell(t), body)), 0);
		const word = Math.max(...cells.map((t) => longest(t, body)), longest(column.label, head), 0);
		const limit = column.numeric ? 150 : 120;
		const keep = column.numeric || (i === 0 && !numeric);
		return {
			least: Math.min(limit, keep ? Math.max(natural, word) : word) + 2 * PAD + HAIR,
			natural: Math.max(natural, type.width(type.spell(column.label), head)) + 2 * PAD + HAIR
		};
	});
	const widths = columnWidths(wanted, WIDTH, numeric ? 0 : node.columns.length - 1);
	const lefts = widths.map((_, i) => MARGIN + widths.slice(0, i).reduce((a, b) => a + b, 0));
	const split = (texts: readonly string[], style: Style) =>
		node.columns.map((_, i) => type.lines(texts[i] ?? '', widths[i]! - 2 * PAD, style));

	const heading = split(
		node.columns.map((c) => c.label),
		head
	);
	const headingHeight = heightOf(heading, head);
	const rows = node.rows.map((row) => split(row, body));
	const heights = rows.map((row) => heightOf(row, body));
	const rowsHeight = heights.reduce((a, b) => a + b, 0);
	const page = flow.bottom - flow.top;
	// A table of less than half a page is kept whole; a longer one begins with at least one row.
	const together = rowsHeight < page / 2 ? rowsHeight : Math.min(heights[0] ?? 0, page / 2);
	const captionHeight = type.lines(node.caption, WIDTH, caption).length * leading(caption.size);
	return {
		widths,
		lefts,
		heading,
		headingHeight,
		rows,
		/** What has to stand on one page with the table's beginning. */
		least: captionHeight + headingHeight + together
	};
}

/** Room that a table must find, its caption and the space above it included. */
export const tableNeeds = (flow: Flow, node: TableNode): number => layOut(flow, node).least + SPACE;

/** A table with its caption; a table that breaks across pages shows its head again on each. */
export function drawTable(flow: Flow, node: TableNode): void {
	const { type } = flow;
	const { widths, lefts, heading, headingHeight, rows, least } = layOut(flow, node);

	flow.space(SPACE);
	flow.need(least);
	const table = flow.element('Table');
	flow.text(node.caption, caption, { tag: 'Caption', parent: table });

	const drawCell = (lines: string[], column: number, style: Style) => {
		const { numeric: right } = node.columns[column]!;
		const left = lefts[column]! + PAD;
		const width = widths[column]! - 2 * PAD;
		let y = flow.y + ABOVE;
		for (const [i, line] of lines.entries()) {
			const x = right ? left + width - type.width(line, style) : left;
			const end = type.draw(line, x, y + drop(style.size), style);
			if (i < lines.length - 1) type.draw(' ', end, y + drop(style.size), style);
			y += leading(style.size);
		}
	};
	const drawHeading = (parent: Element | null) => {
		const draw = (column: number) => drawCell(heading[column]!, column, head);
		if (parent) {
			const row = flow.element('TR', parent);
			node.columns.forEach((_, i) => {
				const cell = flow.element('TH', row, { scope: 'Column' });
				flow.mark(cell, 'TH', () => draw(i));
				cell.end();
			});
			row.end();
		} else {
			flow.artifact(() => node.columns.forEach((_, i) => draw(i)));
		}
		flow.y += headingHeight;
		flow.rule(MARGIN, WIDTH, flow.y, ink.ruleStrong);
	};

	const thead = flow.element('THead', table);
	drawHeading(thead);
	thead.end();
	const tbody = flow.element('TBody', table);
	for (const cells of rows) {
		const row = flow.element('TR', tbody);
		const elements = node.columns.map((_, i) =>
			i === 0 ? flow.element('TH', row, { scope: 'Row' }) : flow.element('TD', row)
		);
		let rest = cells;
		if (heightOf(cells, body) > flow.room) {
			flow.newPage();
			drawHeading(null);
		}
		while (true) {
			// A row taller than a page is the one kind that is cut.
			const fits = Math.max(1, Math.floor((flow.room - 2 * ABOVE) / leading(body.size)));
			const now = rest.map((lines) => lines.slice(0, fits));
			elements.forEach((cell, i) => {
				if (now[i]!.length > 0) {
					flow.mark(cell, i === 0 ? 'TH' : 'TD', () => drawCell(now[i]!, i, body));
				}
			});
			flow.y += heightOf(now, body);
			flow.rule(MARGIN, WIDTH, flow.y);
			rest = rest.map((lines) => lines.slice(fits));
			if (rest.every((lines) => lines.length === 0)) break;
			flow.newPage();
			drawHeading(null);
		}
		elements.forEach((cell) => cell.end());
		row.end();
	}
	tbody.end();
	table.end();
	if (node.note) {
		flow.y += 4;
		flow.text(node.note, { size: 9, colour: ink.muted });
	}
	flow.y += 8;
}
