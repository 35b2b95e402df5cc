import { area, line } from 'd3-shape';
import {
	axisTitle,
	breadth,
	charactersIn,
	FONT,
	round,
	scale,
	snap,
	spread,
	textWidth,
	ticks,
	wrap,
	type Axis,
	type Frame,
	type Tick
} from './axes';

/** One subject's measurements; `group` counts from 0 in the order of `lines`. */
export interface SubjectPoints {
	group: number;
	points: readonly { x: number; y: number }[];
}

/** One fitted line; `lower` and `upper` are the limits of its 95% band, where there are any. */
export interface FittedLine {
	label: string;
	group: number;
	points: readonly { x: number; estimate: number; lower?: number; upper?: number }[];
}

export interface TrajectoryData {
	x: Axis;
	y: Axis;
	subjects: readonly SubjectPoints[];
	lines: readonly FittedLine[];
}

export interface TrajectoryGeometry {
	frame: Frame;
	xTicks: Tick[];
	yTicks: Tick[];
	subjects: { group: number; path: string; points: { x: number; y: number }[] }[];
	bands: { group: number; path: string }[];
	lines: {
		group: number;
		path: string;
		end: { x: number; y: number };
		label: { x: number; y: number; lines: string[]; leader: string | null };
	}[];
	/** A band was wider than the drawing and is cut at its edge. */
	bandCut: boolean;
}

export const LABEL_LINE = 17;
const LABEL_CHARACTERS = 18;

const finite = (p: { x: number; y: number }) => Number.isFinite(p.x) && Number.isFinite(p.y);

/** Where everything stands, or null when there is nothing to draw. Every number in it is finite. */
export function trajectoryGeometry(
	data: TrajectoryData,
	width: number,
	height: number
): TrajectoryGeometry | null {
	const subjects = data.subjects
		.map((s) => ({ ...s, points: s.points.filter(finite).sort((a, b) => a.x - b.x) }))
		.filter((s) => s.points.length > 0);
	const lines = data.lines
		.map((l) => ({
			...l,
			points: l.points
				.filter((p) => Number.isFinite(p.x) && Number.isFinite(p.estimate))
				.sort((a, b) => a.x - b.x)
		}))
		.filter((l) => l.points.length > 0);

	const xs = breadth([
		...subjects.flatMap((s) => s.points.map((p) => p.x)),
		...lines.flatMap((l) => l.points.map((p) => p.x))
	]);
	const centre = breadth([
		...subjects.flatMap((s) => s.points.map((p) => p.y)),
		...lines.flatMap((l) => l.points.map((p) => p.estimate))
	]);
	if (!xs || !centre) return null;
	// A band may widen the drawing by half of what the data span, no more: the data stay legible.
	const reach = (centre[1] - centre[0]) / 2;
	const limits = lines.flatMap((l) =>
		l.points.flatMap((p) => [p.lower, p.upper].filter((v) => v !== undefined))
	);
	const ys: [number, number] = [
		Math.max(centre[0] - reach, Math.min(centre[0], ...limits.filter(Number.isFinite))),
		Math.min(centre[1] + reach, Math.max(centre[1], ...limits.filter(Number.isFinite)))
	];

	const top = 34;
	const bottom = height - 50;
	const y = scale(ys, [bottom, top], true);
	const yTicks = ticks(y, 5);
	const left = Math.ceil(Math.max(24, ...yTicks.map((t) => textWidth(t.text)))) + 14;
	const letters = Math.min(LABEL_CHARACTERS, charactersIn(width * 0.32 - 18));
	const words = lines.map((l) => wrap(l.label, letters, 3));
	const room = Math.min(width * 0.32, Math.max(0, ...words.flat().map(textWidth)) + 18);
	const right = Math.max(left + 40, width - Math.max(16, room));
	const xCount = width < 440 ? 4 : 6;
	const x = scale(snap(xs, xCount), [left, right], false);
	const xTicks = ticks(x, xCount);

	const edge = y.domain() as [number, number];
	let bandCut = false;
	const within = (v: number) => {
		const kept = Math.min(edge[1], Math.max(edge[0], v));
		if (kept !== v) bandCut = true;
		return y(kept);
	};

	const drawSubject = line<{ x: number; y: number }>()
		.x((p) => p.x)
		.y((p) => p.y)
		.digits(2);
	const drawLine = line<FittedLine['points'][number]>()
		.x((p) => x(p.x))
		.y((p) => y(p.estimate))
		.digits(2);
	const drawBand = area<FittedLine['points'][number]>()
		.defined((p) => Number.isFinite(p.lower) && Number.isFinite(p.upper))
		.x((p) => x(p.x))
		.y0((p) => within(p.lower!))
		.y1((p) => within(p.upper!))
		.digits(2);

	const ends = lines.map((l) => {
		const last = l.points.at(-1)!;
		return { x: round(x(last.x)), y: round(y(last.estimate)) };
	});
	const centres = spread(
		ends.map((e, i) => ({ at: e.y, height: words[i]!.length * LABEL_LINE + 3 })),
		0,
		bottom
	);

	return {
		frame: { left, right, top, bottom },
		xTicks,
		yTicks,
		subjects: subjects.map((s) => {
			const points = s.points.map((p) => ({ x: round(x(p.x)), y: round(y(p.y)) }));
			return { group: s.group, path: drawSubject(points) ?? '', points };
		}),
		bands: lines
			.map((l) => ({ group: l.group, path: drawBand(l.points) ?? '' }))
			.filter((b) => b.path !== ''),
		lines: lines.map((l, i) => {
			const end = ends[i]!;
			const middle = centres[i]!;
			const text = words[i]!;
			return {
				group: l.group,
				path: drawLine(l.points) ?? '',
				end,
				label: {
					x: round(end.x + 12),
					// The first baseline of a block whose middle stands at the line's end.
					y: round(middle - ((text.length - 1) * LABEL_LINE) / 2 + FONT * 0.35),
					lines: text,
					leader:
						Math.abs(middle - end.y) > LABEL_LINE / 2
							? `M${end.x + 2},${end.y}L${round(end.x + 10)},${round(middle)}`
							: null
				}
			};
		}),
		bandCut
	};
}

const plural = (n: number, one: string) => `${n} ${one}${n === 1 ? '' : 's'}`;

/** The chart in words: what the axes are, how much is drawn, and where each fitted line begins and ends. */
export function trajectoryWords(
	data: TrajectoryData,
	number: (value: number) => string = (v) => String(Number(v.toPrecision(4))).replace('-', '−')
): string {
	const drawn = data.subjects.filter((s) => s.points.some(finite));
	const points = drawn.reduce((n, s) => n + s.points.filter(finite).length, 0);
	const unit = data.y.unit ? ` ${data.y.unit}` : '';
	const first = `${axisTitle(data.y)} against ${axisTitle(data.x)}: ${plural(points, 'measurement')} of ${plural(drawn.length, 'subject')}, one thin line a subject.`;
	const lines = data.lines.flatMap((l) => {
		const ordered = l.points
			.filter((p) => Number.isFinite(p.estimate) && Number.isFinite(p.x))
			.sort((a, b) => a.x - b.x);
		const from = ordered[0];
		const to = ordered.at(-1);
		if (!from || !to) return [];
		const band =
			Number.isFinite(to.lower) && Number.isFinite(to.upper)
				? ` (95% band there ${number(to.lower!)} to ${number(to.upper!)})`
				: '';
		return [
			`Fitted line ${l.label}: ${number(from.estimate)}${unit} at ${number(from.x)}, ${number(to.estimate)}${unit} at ${number(to.x)}${band}.`
		];
	});
	return [first, ...lines].join(' ');
}
