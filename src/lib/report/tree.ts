import type { FlowData } from '$lib/components/charts/flow';
import type { PlanData } from '$lib/components/charts/plan';
import type { ResidualData } from '$lib/components/charts/residual';
import type { TrajectoryData } from '$lib/components/charts/trajectory';

/** A report as pages know nothing of it: what is said, in order. Screen and paper each draw it. */
export interface ReportTree {
	title: string;
	language: 'en-GB';
	kind: 'open' | 'closed';
	/** Said once, at the front. */
	cover: {
		overline: string;
		title: string;
		subtitle: string;
		facts: Definition[];
		cautions: CautionNode[];
	};
	/** Said on every page. */
	everyPage: {
		/** What this is: study code, look, kind. */
		name: string;
		/** Warnings in capitals at the head of the page. */
		banners: string[];
		/** The cut's fingerprint: 64 hexadecimal digits. */
		fingerprint: string;
		/** Whom a released copy was made for, and when. */
		released: { to: string; at: string } | null;
	};
	body: ReportNode[];
}

export interface Definition {
	term: string;
	text: string;
}

export interface HeadingNode {
	kind: 'heading';
	level: 1 | 2;
	text: string;
}

export interface ParagraphNode {
	kind: 'paragraph';
	text: string;
}

export interface CautionNode {
	kind: 'caution';
	/** `warning`: this report itself is in question; `caution`: a standing one. */
	tone: 'warning' | 'caution';
	title: string;
	text: string;
}

export interface DefinitionsNode {
	kind: 'definitions';
	items: Definition[];
}

export interface TableNode {
	kind: 'table';
	caption: string;
	/** The first column names the row. */
	columns: { label: string; numeric: boolean }[];
	rows: string[][];
	note?: string;
}

export interface FigureNode {
	kind: 'figure';
	caption: string;
	/** The figure in words. */
	alt: string;
	chart:
		| { type: 'trajectory'; data: TrajectoryData }
		| { type: 'residual'; data: ResidualData }
		| { type: 'flow'; data: FlowData }
		| { type: 'plan'; data: PlanData };
}

export type ReportNode =
	HeadingNode | ParagraphNode | CautionNode | DefinitionsNode | TableNode | FigureNode;

function chartText(chart: FigureNode['chart']): string[] {
	switch (chart.type) {
		case 'trajectory':
			return [chart.data.x.label, chart.data.y.label, ...chart.data.lines.map((l) => l.label)];
		case 'residual':
			return [chart.data.fitted.label, chart.data.residual.label];
		case 'flow':
			return flowText(chart.data);
		case 'plan':
			return chart.data.months.map(({ month }) => month);
	}
}

const flowText = ({ steps, columns }: FlowData): string[] =>
	[...steps.flatMap(({ main, side }) => (side ? [main, side] : [main])), ...columns].flatMap(
		({ title, lines }) => [title, ...lines]
	);

/** Every string that a reader of the tree may see, in order. */
export function reportText(tree: ReportTree): string[] {
	const facts = (items: Definition[]) => items.flatMap((d) => [d.term, d.text]);
	const node = (n: ReportNode): string[] => {
		switch (n.kind) {
			case 'heading':
			case 'paragraph':
				return [n.text];
			case 'caution':
				return [n.title, n.text];
			case 'definitions':
				return facts(n.items);
			case 'table':
				return [n.caption, ...n.columns.map((c) => c.label), ...n.rows.flat(), n.note ?? ''];
			case 'figure':
				return [n.caption, n.alt, ...chartText(n.chart)];
		}
	};
	const { cover, everyPage } = tree;
	return [
		tree.title,
		cover.overline,
		cover.title,
		cover.subtitle,
		...facts(cover.facts),
		...cover.cautions.flatMap(node),
		everyPage.name,
		...everyPage.banners,
		everyPage.fingerprint,
		everyPage.released?.to ?? '',
		everyPage.released?.at ?? '',
		...tree.body.flatMap(node)
	].filter((text) => text !== '');
}
