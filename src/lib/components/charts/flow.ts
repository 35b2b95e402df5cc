import { charactersIn, FONT, round, wrap } from './axes';

/** A box of the diagram: a heading with its number, and what it is made of. */
export interface FlowBox {
	title: string;
	lines: readonly string[];
}

/** Steps from top to bottom, each with what leaves it to the side; then the columns, side by side. */
export interface FlowData {
	steps: readonly { main: FlowBox; side: FlowBox | null }[];
	columns: readonly FlowBox[];
}

export interface DrawnBox {
	x: number;
	y: number;
	width: number;
	height: number;
	title: { y: number; lines: string[] };
	lines: { y: number; text: string }[];
}

export interface FlowGeometry {
	height: number;
	boxes: DrawnBox[];
	/** Paths of the threads between boxes. */
	threads: string[];
}

export const FLOW_LINE = 18;
const PAD = 10;
const GAP = 22;

function fill(box: FlowBox, x: number, y: number, width: number): DrawnBox {
	const letters = charactersIn(width - 2 * PAD);
	const title = wrap(box.title, letters, 3);
	const lines = box.lines.flatMap((line) => wrap(line, letters, 3));
	const height = (title.length + lines.length) * FLOW_LINE + 2 * PAD;
	const first = y + PAD + FONT * 0.85;
	return {
		x: round(x),
		y: round(y),
		width: round(width),
		height,
		title: { y: round(first), lines: title },
		lines: lines.map((text, at) => ({
			text,
			y: round(first + (title.length + at) * FLOW_LINE)
		}))
	};
}

/** Where every box and thread stands. Narrow drawings put what leaves beneath, not beside. */
export function flowGeometry(data: FlowData, width: number): FlowGeometry {
	const narrow = width < 460;
	const boxes: DrawnBox[] = [];
	const threads: string[] = [];
	const mainWidth = narrow ? width - 2 : (width - GAP) / 2;
	let y = 1;
	let above: DrawnBox | null = null;
	for (const { main, side } of data.steps) {
		const box = fill(main, 1, y, mainWidth - 1);
		if (above) threads.push(down(above, box));
		boxes.push(box);
		y = box.y + box.height + GAP;
		above = box;
		if (!side) continue;
		if (narrow) {
			const beneath = fill(side, 1 + GAP, y, width - GAP - 2);
			threads.push(
				`M${round(1 + GAP / 2)},${box.y + box.height}V${round(y + beneath.height / 2)}H${1 + GAP}`
			);
			boxes.push(beneath);
			y = beneath.y + beneath.height + GAP;
			continue;
		}
		const beside = fill(side, mainWidth + GAP, y, width - mainWidth - GAP - 1);
		threads.push(
			`M${round(box.x + box.width / 2)},${box.y + box.height}V${round(y + beside.height / 2)}H${beside.x}`
		);
		boxes.push(beside);
		y = beside.y + beside.height + GAP;
	}
	const count = Math.max(1, data.columns.length);
	const each = narrow ? width - 2 : (width - GAP * (count - 1) - 2) / count;
	let lowest = y;
	data.columns.forEach((column, at) => {
		const box = fill(column, narrow ? 1 : 1 + at * (each + GAP), narrow ? lowest : y, each);
		if (above && (!narrow || at === 0)) threads.push(down(above, box));
		boxes.push(box);
		lowest = narrow ? box.y + box.height + GAP : Math.max(lowest, box.y + box.height + GAP);
	});
	return { height: Math.ceil(lowest - GAP + 2), boxes, threads };
}

/** From the foot of one box to the head of another, round the corner where they do not stand above each other. */
function down(from: DrawnBox, to: DrawnBox): string {
	const [x, start] = [round(from.x + from.width / 2), from.y + from.height];
	const inside = x >= to.x && x <= to.x + to.width;
	if (inside) return `M${x},${start}V${to.y}`;
	const bend = round(to.y - GAP / 2);
	return `M${x},${start}V${bend}H${round(to.x + to.width / 2)}V${to.y}`;
}

/** The diagram in words, from top to bottom. */
export function flowWords(data: FlowData): string {
	const box = (of: FlowBox) =>
		`${of.title}${of.lines.length > 0 ? ` (${of.lines.join('; ')})` : ''}.`;
	return [
		...data.steps.flatMap(({ main, side }) => [box(main), ...(side ? [box(side)] : [])]),
		...data.columns.map(box)
	].join(' ');
}
