import { extent } from 'd3-array';
import { scaleLinear, type ScaleLinear } from 'd3-scale';

export interface Axis {
	label: string;
	unit: string;
}

export interface Tick {
	at: number;
	text: string;
}

export interface Frame {
	left: number;
	right: number;
	top: number;
	bottom: number;
}

export const FONT = 14;
/** Mean advance of the typeface at 14 px; used for room, never for exact placing. */
const ADVANCE = 7.6;

export const textWidth = (text: string): number => text.length * ADVANCE;
export const round = (n: number): number => Math.round(n * 100) / 100;
/** How many characters are sure to fit; capitals are wider than the mean. */
export const charactersIn = (width: number): number => Math.max(4, Math.floor(width / 8.6));
export const axisTitle = (axis: Axis): string =>
	axis.unit ? `${axis.label}, ${axis.unit}` : axis.label;

/** The title in one line of `width`: a long name is shortened, its unit is not. */
export function axisLine(axis: Axis, width: number): string {
	const letters = charactersIn(width);
	const whole = axisTitle(axis);
	if (whole.length <= letters) return whole;
	const name = wrap(axis.label, Math.max(4, letters - axis.unit.length - 2), 1)[0] ?? '';
	return axisTitle({ ...axis, label: name });
}

/** A domain with some breadth: a constant is widened, so that no coordinate is ever NaN. */
export function breadth(values: Iterable<number>): [number, number] | null {
	const [low, high] = extent([...values].filter(Number.isFinite));
	if (low === undefined || high === undefined) return null;
	if (high > low) return [low, high];
	const half = Math.abs(low) > 0 ? Math.abs(low) * 0.1 : 1;
	return [low - half, high + half];
}

export const scale = (domain: [number, number], range: [number, number], nice: boolean) => {
	const made = scaleLinear(domain, range);
	return nice ? made.nice(6) : made;
};

/** `domain` out to the next tick on a side where that costs little: an axis from 0.02 starts at 0. */
export function snap(domain: [number, number], howMany: number): [number, number] {
	const span = domain[1] - domain[0];
	const [low, high] = scaleLinear(domain, [0, 1]).nice(howMany).domain() as [number, number];
	return [
		domain[0] - low <= span * 0.03 ? low : domain[0],
		high - domain[1] <= span * 0.03 ? high : domain[1]
	];
}

/** Ticks with a true minus sign (d3-format writes U+2212) and no more digits than their step needs. */
export function ticks(of: ScaleLinear<number, number>, howMany: number): Tick[] {
	const text = of.tickFormat(howMany);
	return of.ticks(howMany).map((v) => ({ at: round(of(v)), text: text(v).replace('-', '−') }));
}

/** `text` in lines of at most `width` characters; a longer word is cut, the rest past `max` lines shortened with an ellipsis. */
export function wrap(text: string, width: number, max: number): string[] {
	const lines: string[] = [];
	for (const word of text.trim().split(/\s+/)) {
		let rest = word;
		const last = lines.at(-1);
		if (last !== undefined && last.length + 1 + rest.length <= width) {
			lines[lines.length - 1] = `${last} ${rest}`;
			continue;
		}
		while (rest.length > width) {
			lines.push(`${rest.slice(0, width - 1)}-`);
			rest = rest.slice(width - 1);
		}
		if (rest) lines.push(rest);
	}
	if (lines.length <= max) return lines;
	const kept = lines.slice(0, max);
	const end = kept[max - 1] ?? '';
	kept[max - 1] = `${end.slice(0, width - 1).replace(/-$/, '')}…`;
	return kept;
}

/** Moves wanted positions apart to at least their heights, within [top, bottom] where they fit; order is kept. */
export function spread(
	wanted: readonly { at: number; height: number }[],
	top: number,
	bottom: number
): number[] {
	const order = wanted.map((_, i) => i).sort((a, b) => wanted[a]!.at - wanted[b]!.at || a - b);
	const placed: number[] = wanted.map((w) => w.at);
	let floor = top;
	for (const i of order) {
		const half = wanted[i]!.height / 2;
		placed[i] = Math.max(placed[i]!, floor + half);
		floor = placed[i]! + half;
	}
	let ceiling = bottom;
	for (const i of [...order].reverse()) {
		const half = wanted[i]!.height / 2;
		if (placed[i]! + half <= ceiling) break;
		placed[i] = ceiling - half;
		ceiling = placed[i]! - half;
	}
	return placed;
}

/** A lozenge knot of half-diagonal `r`. */
export const lozenge = (x: number, y: number, r: number): string =>
	`M${round(x)},${round(y - r)}L${round(x + r)},${round(y)}L${round(x)},${round(y + r)}L${round(x - r)},${round(y)}Z`;
