import { createRawSnippet } from 'svelte';
import { render } from 'svelte/server';
import { describe, expect, test } from 'vitest';
import { axisLine, spread, wrap } from './axes';
import {
	ChartFigure,
	paperPalette,
	ResidualChart,
	residualWords,
	TrajectoryChart,
	trajectoryWords
} from '.';
import { residualGeometry } from './residual';
import { trajectoryGeometry, type TrajectoryData } from './trajectory';

const axes = { x: { label: 'Age', unit: 'years' }, y: { label: 'Height', unit: 'mm' } };
const line = (label: string, group: number, from: number, to: number) => ({
	label,
	group,
	points: [
		{ x: 0, estimate: from, lower: from - 1, upper: from + 1 },
		{ x: 10, estimate: to, lower: to - 1, upper: to + 1 }
	]
});
const data: TrajectoryData = {
	...axes,
	subjects: [
		{
			group: 0,
			points: [
				{ x: 0, y: 0 },
				{ x: 10, y: 100 }
			]
		},
		{
			group: 1,
			points: [
				{ x: 5, y: 50 },
				{ x: 0, y: 20 }
			]
		}
	],
	lines: [line('boy', 0, 10, 80), line('girl', 1, 5, 60)]
};
const svgOf = (component: unknown, props: Record<string, unknown>): string =>
	render(component as never, { props: { title: 'A title', ...props } as never }).body;

/** Every number that stands in an attribute of the drawing. */
function numbers(svg: string): number[] {
	expect(svg).not.toMatch(/NaN|Infinity|undefined|null/);
	return [...svg.matchAll(/ (?:x|y|d|viewBox|width|height)="([^"]*)"/g)].flatMap((m) =>
		[...m[1]!.matchAll(/-?\d+(?:\.\d+)?(?:e-?\d+)?/g)].map((n) => Number(n[0]))
	);
}

describe('the trajectory chart', () => {
	const drawn = trajectoryGeometry(data, 560, 360)!;
	const { frame } = drawn;

	test('known points stand where the axes say', () => {
		expect(drawn.subjects[0]!.points).toEqual([
			{ x: frame.left, y: frame.bottom },
			{ x: frame.right, y: frame.top }
		]);
		// Out of order in the data, in order of time on the thread.
		const middle = (frame.left + frame.right) / 2;
		expect(drawn.subjects[1]!.points[1]!.x).toBeCloseTo(middle, 1);
		expect(drawn.subjects[1]!.points[1]!.y).toBeCloseTo((frame.top + frame.bottom) / 2, 1);
		expect(drawn.xTicks.map((t) => t.text)).toEqual(['0', '2', '4', '6', '8', '10']);
		expect(drawn.xTicks.at(-1)!.at).toBe(frame.right);
	});

	test('each line has its label at its end, within the drawing', () => {
		for (const fit of drawn.lines) {
			expect(fit.end.x).toBe(frame.right);
			expect(fit.label.x).toBeGreaterThan(fit.end.x);
			expect(Math.abs(fit.label.y - 14 * 0.35 - fit.end.y)).toBeLessThan(1);
			expect(fit.label.leader).toBeNull();
		}
		const svg = svgOf(TrajectoryChart, { data });
		expect(svg).toMatch(/font-weight="bold"[^>]*>boy</);
		expect(svg).toMatch(/font-weight="bold"[^>]*>girl</);
	});

	test('labels of lines that end together are moved apart and tied to their ends', () => {
		const close = trajectoryGeometry(
			{ ...data, lines: [line('first', 0, 10, 50), line('second', 1, 5, 50.5)] },
			560,
			360
		)!;
		const [a, b] = close.lines.map((l) => l.label.y).sort((x, y) => x - y);
		expect(b! - a!).toBeGreaterThanOrEqual(17);
		expect(close.lines.some((l) => l.label.leader !== null)).toBe(true);
	});

	test('lines differ by dash, not by colour alone', () => {
		const svg = svgOf(TrajectoryChart, {
			data: { ...data, lines: [...data.lines, line('third', 2, 1, 2)] }
		});
		const strokes = [...svg.matchAll(/stroke-width="3"([^>]*)>/g)].map(
			(m) => /stroke-dasharray="([^"]*)"/.exec(m[1]!)?.[1] ?? 'solid'
		);
		expect(new Set(strokes).size).toBe(3);
	});

	test('the axes carry names with units, and a true minus sign', () => {
		const svg = svgOf(TrajectoryChart, {
			data: {
				...axes,
				subjects: [
					{
						group: 0,
						points: [
							{ x: -4, y: -20 },
							{ x: 4, y: 20 }
						]
					}
				],
				lines: []
			}
		});
		expect(svg).toContain('>Height, mm<');
		expect(svg).toContain('>Age, years<');
		expect(svg).toContain('>−20<');
		expect(svg).not.toMatch(/>-\d/);
	});

	test('colours follow the theme on screen and are fixed on paper', () => {
		expect(svgOf(TrajectoryChart, { data })).toContain('var(--arm-a)');
		const paper = svgOf(TrajectoryChart, { data, palette: paperPalette });
		expect(paper).not.toMatch(/var\(|currentColor/);
		expect(paper).toContain('#28396b');
		// What the PDF's drawing code does not know.
		expect(paper).not.toMatch(/<style|clip-path|filter=/);
	});

	test('says itself in words to those who do not see it', () => {
		const svg = svgOf(TrajectoryChart, { data });
		const ids = /aria-labelledby="(\S+) (\S+)"/.exec(svg)!;
		expect(svg).toContain(`<title id="${ids[1]}">A title</title>`);
		expect(svg).toContain(`<desc id="${ids[2]}">${trajectoryWords(data)}</desc>`);
		expect(trajectoryWords(data)).toBe(
			'Height, mm against Age, years: 4 measurements of 2 subjects, one thin line a subject. ' +
				'Fitted line boy: 10 mm at 0, 80 mm at 10 (95% band there 79 to 81). ' +
				'Fitted line girl: 5 mm at 0, 60 mm at 10 (95% band there 59 to 61).'
		);
	});

	test('a band far wider than the data is cut at the edge, and the data stay legible', () => {
		const wild = line('wild', 0, 10, 80);
		wild.points[1]!.upper = 1e9;
		const cut = trajectoryGeometry({ ...data, lines: [wild] }, 560, 360)!;
		expect(cut.bandCut).toBe(true);
		const height = frame.bottom - frame.top;
		const [low, high] = cut.subjects[0]!.points;
		expect(low!.y - high!.y).toBeGreaterThan(height * 0.4);
		expect(drawn.bandCut).toBe(false);
	});

	test.each<[string, Partial<TrajectoryData>]>([
		['one subject', { subjects: data.subjects.slice(0, 1), lines: [] }],
		['one point', { subjects: [{ group: 0, points: [{ x: 3, y: 7 }] }], lines: [] }],
		[
			'a constant outcome',
			{
				subjects: [
					{
						group: 0,
						points: [
							{ x: 0, y: 5 },
							{ x: 1, y: 5 }
						]
					}
				],
				lines: [
					{
						label: 'all',
						group: 0,
						points: [
							{ x: 0, estimate: 5 },
							{ x: 1, estimate: 5 }
						]
					}
				]
			}
		],
		['all zero', { subjects: [{ group: 0, points: [{ x: 0, y: 0 }] }], lines: [] }],
		[
			'numbers that are none',
			{
				subjects: [
					{
						group: 0,
						points: [
							{ x: NaN, y: 1 },
							{ x: 1, y: Infinity },
							{ x: 2, y: 3 }
						]
					}
				],
				lines: [
					{
						label: 'all',
						group: 5,
						points: [
							{ x: 0, estimate: NaN, lower: NaN, upper: 1 },
							{ x: 1, estimate: 4, lower: -Infinity, upper: Infinity }
						]
					}
				]
			}
		],
		[
			'huge numbers',
			{
				subjects: [
					{
						group: 0,
						points: [
							{ x: 0, y: 1e15 },
							{ x: 1e12, y: -1e15 }
						]
					}
				],
				lines: []
			}
		]
	])('with %s every coordinate is finite', (_, change) => {
		for (const width of [280, 560]) {
			const all = numbers(svgOf(TrajectoryChart, { data: { ...data, ...change }, width }));
			expect(all.length).toBeGreaterThan(10);
			expect(all.every(Number.isFinite)).toBe(true);
		}
	});

	test('with no rows it says so', () => {
		const empty = { ...data, subjects: [], lines: [] };
		expect(svgOf(TrajectoryChart, { data: empty })).toContain('No measurements to draw yet.');
		expect(trajectoryGeometry(empty, 560, 360)).toBeNull();
	});
});

describe('the residual chart', () => {
	const residuals = {
		fitted: { label: 'Fitted value', unit: 'mm' },
		residual: { label: 'Residual', unit: 'mm' },
		points: [
			{ fitted: 0, residual: -4 },
			{ fitted: 10, residual: 4 },
			{ fitted: 5, residual: 0 }
		],
		sd: 1.5
	};

	test('zero is in the middle, and points stand where the axes say', () => {
		const { frame, zero, points, limits } = residualGeometry(residuals, 560, 320)!;
		expect(zero).toBe((frame.top + frame.bottom) / 2);
		expect(points[2]).toEqual({ x: (frame.left + frame.right) / 2, y: zero });
		expect(points[0]!.y - zero).toBeCloseTo(zero - points[1]!.y, 6);
		expect(limits.map((l) => l.text)).toEqual(['2 SD', '−2 SD']);
		expect(limits[0]!.y).toBeCloseTo(zero - ((zero - points[1]!.y) * 3) / 4, 1);
	});

	test('says in words how many lie far out', () => {
		expect(residualWords(residuals)).toContain('2 of them (67%) lie more than two');
	});

	test.each([
		['no rows', [], null],
		['one row', [{ fitted: 3, residual: 0 }], null],
		[
			'a perfect fit',
			[
				{ fitted: 3, residual: 0 },
				{ fitted: 3, residual: 0 }
			],
			0
		],
		[
			'numbers that are none',
			[
				{ fitted: NaN, residual: 1 },
				{ fitted: 1, residual: 2 }
			],
			NaN
		]
	])('with %s every coordinate is finite', (_, points, sd) => {
		const svg = svgOf(ResidualChart, { data: { ...residuals, points, sd } });
		expect(numbers(svg).every(Number.isFinite)).toBe(true);
		expect(svg.includes('No residuals to draw yet.')).toBe(points.length === 0);
	});
});

describe('a chart on a page', () => {
	test('has its caption before it and its words after it', () => {
		const chart = createRawSnippet<[number]>((width) => ({
			render: () => `<svg data-width="${width()}"></svg>`
		}));
		const html = render(ChartFigure, {
			props: { caption: 'What happened', words: 'In words.', chart }
		}).body.replace(/<!--.*?-->/gs, '');
		expect(html).toMatch(
			/<figcaption[^>]*>What happened<.*<svg data-width="560">.*<summary[^>]*>This figure in words<.*In words\./s
		);
	});
});

describe('making room', () => {
	test('spread keeps order, gaps and the top', () => {
		expect(
			spread(
				[
					{ at: 5, height: 20 },
					{ at: 6, height: 20 }
				],
				0,
				100
			)
		).toEqual([10, 30]);
		expect(
			spread(
				[
					{ at: 99, height: 20 },
					{ at: 98, height: 20 }
				],
				0,
				100
			)
		).toEqual([90, 70]);
		expect(spread([{ at: 50, height: 20 }], 0, 100)).toEqual([50]);
	});

	test('an axis title too long for its line keeps its unit', () => {
		const axis = { label: 'a measure with a very long name indeed', unit: 'mmol/L' };
		expect(axisLine(axis, 1000)).toBe('a measure with a very long name indeed, mmol/L');
		expect(axisLine(axis, 260)).toMatch(/^a measure .*…, mmol\/L$/);
	});

	test('wrap cuts long words and ends long texts with an ellipsis', () => {
		expect(wrap('a short one', 18, 3)).toEqual(['a short one']);
		const lines = wrap(`${'x'.repeat(40)} and more words than fit`, 18, 3);
		expect(lines).toHaveLength(3);
		expect(lines.every((l) => l.length <= 18)).toBe(true);
		expect(lines[2]).toMatch(/…$/);
	});
});
