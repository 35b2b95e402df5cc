import { render } from 'svelte/server';
import SVGtoPDF from 'svg-to-pdfkit';
import ResidualChart from '$lib/components/charts/ResidualChart.svelte';
import TrajectoryChart from '$lib/components/charts/TrajectoryChart.svelte';
import { paperPalette } from '$lib/components/charts/palette';
import type { FigureNode } from '$lib/report/tree';
import { leading, MARGIN, WIDTH, type Flow } from './flow';
import type { Style, Type } from './type';

/**
 * Drawn a little wider than the column, so that the chart's 14 px come out near the text's size; a
 * little lower when that saves a page.
 */
const DRAWN = { width: 640, height: 320, lowest: 234 };
const SCALE = WIDTH / DRAWN.width;
const SPACE = 8;
const BELOW = 12;
const caption: Style = { size: 11, weight: 'bold' };

/** The chart's words as the faces at hand can write them: before it is laid out, for they may grow. */
function spelled(chart: FigureNode['chart'], type: Type): FigureNode['chart'] {
	const axis = <T extends { label: string; unit: string }>(of: T): T => ({
		...of,
		label: type.spell(of.label),
		unit: type.spell(of.unit)
	});
	if (chart.type === 'residual') {
		const { fitted, residual } = chart.data;
		return { ...chart, data: { ...chart.data, fitted: axis(fitted), residual: axis(residual) } };
	}
	const { x, y, lines } = chart.data;
	return {
		...chart,
		data: {
			...chart.data,
			x: axis(x),
			y: axis(y),
			lines: lines.map((l) => ({ ...l, label: type.spell(l.label) }))
		}
	};
}

/** The chart that the screen shows, drawn by the same component with ink for paper. */
function chartSvg(node: FigureNode, type: Type, height: number): string {
	const shared = {
		title: node.caption,
		desc: node.alt,
		palette: paperPalette,
		width: DRAWN.width,
		height
	};
	const chart = spelled(node.chart, type);
	const { body } =
		chart.type === 'trajectory'
			? render(TrajectoryChart, { props: { ...shared, data: chart.data } })
			: render(ResidualChart, { props: { ...shared, data: chart.data } });
	// Without a size of its own the drawing takes the one it is given.
	return body
		.replace(/<!--.*?-->/gs, '')
		.replace(/<svg\b[^>]*>/, (root) => root.replace(/ (?:width|height)="[^"]*"/g, ''));
}

const unescape = (text: string) =>
	text
		.replace(/&lt;/g, '<')
		.replace(/&gt;/g, '>')
		.replace(/&quot;/g, '"')
		.replace(/&amp;/g, '&');
const escape = (text: string) =>
	text.replace(/&/g, '&amp;').replace(/</g, '&lt;').replace(/>/g, '&gt;');

/** The chart's own words go through the same runs of faces as all other text. */
function inRuns(svg: string, type: Type): string {
	return svg
		.replace(/<(title|desc)\b[^>]*>[^<]*<\/\1>/g, '')
		.replace(
			/(<text\b[^>]*>)([^<]*)(<\/text>)/g,
			(_, open: string, words: string, close: string) => {
				const spelled = type.spell(unescape(words));
				const runs = type
					.runs(spelled)
					.map((run) =>
						run.face.endsWith('-rest')
							? `<tspan font-family="rest">${escape(run.text)}</tspan>`
							: escape(run.text)
					);
				return `${open}${runs.join('')}${close}`;
			}
		);
}

const captionHeight = (flow: Flow, node: FigureNode): number =>
	flow.type.lines(node.caption, WIDTH, caption).length * leading(caption.size) + 4;

/** Room that a figure must find, its caption and the space above it included. */
export const figureNeeds = (flow: Flow, node: FigureNode): number =>
	SPACE + captionHeight(flow, node) + DRAWN.lowest * SCALE + BELOW;

export function drawFigure(flow: Flow, node: FigureNode): void {
	const { doc, type } = flow;
	flow.space(SPACE);
	flow.need(figureNeeds(flow, node) - SPACE);
	flow.text(node.caption, caption, { tag: 'P' });
	flow.y += 4;
	const drawn = Math.min(DRAWN.height, Math.floor((flow.room - BELOW) / SCALE));
	const height = drawn * SCALE;
	const figure = flow.element('Figure', flow.root, {
		alt: node.alt,
		bbox: [MARGIN, flow.y, MARGIN + WIDTH, flow.y + height]
	});
	flow.mark(figure, 'Figure', () => {
		SVGtoPDF(doc, inRuns(chartSvg(node, type, drawn), type), MARGIN, flow.y, {
			width: WIDTH,
			height,
			assumePt: true,
			fontCallback: (family: string, bold: boolean) =>
				`${bold ? 'bold' : 'regular'}${family === 'rest' ? '-rest' : ''}`
		});
	});
	figure.end();
	flow.y += height + BELOW;
}
