import { render } from 'svelte/server';
import SVGtoPDF from 'svg-to-pdfkit';
import { flowGeometry, type FlowBox } from '$lib/components/charts/flow';
import FlowChart from '$lib/components/charts/FlowChart.svelte';
import PlanChart from '$lib/components/charts/PlanChart.svelte';
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
/** How much smaller a diagram of boxes may be drawn to stay on the page: its words are then 8.5 points high. */
const BOXES_LEAST = 0.8;
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
	const box = (of: FlowBox): FlowBox => ({
		title: type.spell(of.title),
		lines: of.lines.map((line) => type.spell(line))
	});
	switch (chart.type) {
		case 'residual': {
			const { fitted, residual } = chart.data;
			return { ...chart, data: { ...chart.data, fitted: axis(fitted), residual: axis(residual) } };
		}
		case 'trajectory': {
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
		case 'flow':
			return {
				...chart,
				data: {
					steps: chart.data.steps.map(({ main, side }) => ({
						main: box(main),
						side: side && box(side)
					})),
					columns: chart.data.columns.map(box)
				}
			};
		case 'plan':
			return chart;
	}
}

/** How high a chart is drawn, and how low it may become to save a page. A diagram of boxes is as high as its words. */
function heights(chart: FigureNode['chart']): { height: number; lowest: number } {
	if (chart.type === 'flow') {
		const { height } = flowGeometry(chart.data, DRAWN.width);
		return { height, lowest: height * BOXES_LEAST };
	}
	return chart.type === 'plan' ? { height: DRAWN.lowest, lowest: DRAWN.lowest } : DRAWN;
}

/** The chart that the screen shows, drawn by the same component with ink for paper. */
function chartSvg(node: FigureNode, chart: FigureNode['chart'], height: number): string {
	const shared = {
		title: node.caption,
		desc: node.alt,
		palette: paperPalette,
		width: DRAWN.width
	};
	const drawn = () => {
		switch (chart.type) {
			case 'trajectory':
				return render(TrajectoryChart, { props: { ...shared, height, data: chart.data } });
			case 'residual':
				return render(ResidualChart, { props: { ...shared, height, data: chart.data } });
			case 'flow':
				return render(FlowChart, { props: { ...shared, data: chart.data } });
			case 'plan':
				return render(PlanChart, { props: { ...shared, height, data: chart.data } });
		}
	};
	const { body } = drawn();
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
	SPACE +
	captionHeight(flow, node) +
	heights(spelled(node.chart, flow.type)).lowest * SCALE +
	BELOW;

export function drawFigure(flow: Flow, node: FigureNode): void {
	const { doc, type } = flow;
	const chart = spelled(node.chart, type);
	const wanted = heights(chart);
	flow.space(SPACE);
	flow.need(captionHeight(flow, node) + wanted.lowest * SCALE + BELOW);
	flow.text(node.caption, caption, { tag: 'P' });
	flow.y += 4;
	const drawn = Math.min(wanted.height, Math.floor((flow.room - BELOW) / SCALE));
	// Boxes are as high as their words, so they are made smaller as a whole; the others are laid out anew.
	const smaller = chart.type === 'flow' ? drawn / wanted.height : 1;
	const width = WIDTH * smaller;
	const height = drawn * SCALE;
	const figure = flow.element('Figure', flow.root, {
		alt: node.alt,
		bbox: [MARGIN, flow.y, MARGIN + width, flow.y + height]
	});
	flow.mark(figure, 'Figure', () => {
		SVGtoPDF(doc, inRuns(chartSvg(node, chart, drawn), type), MARGIN, flow.y, {
			width,
			height,
			assumePt: true,
			fontCallback: (family: string, bold: boolean) =>
				`${bold ? 'bold' : 'regular'}${family === 'rest' ? '-rest' : ''}`
		});
	});
	figure.end();
	flow.y += height + BELOW;
}
