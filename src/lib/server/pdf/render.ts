import PDFDocument from 'pdfkit';
import { groupedHex } from '$lib/report/format';
import type { CautionNode, DefinitionsNode, ReportNode, ReportTree } from '$lib/report/tree';
import { drawFigure, figureNeeds } from './figure';
import { A4, drop, Flow, leading, MARGIN, WIDTH } from './flow';
import { drawTable, tableNeeds } from './table';
import { ink, Type, type Doc, type Style } from './type';

export interface RenderOptions {
	/** Stands in the file as its creation date; the same tree and date give the same bytes. */
	createdAt: Date;
}

const small: Style = { size: 8, colour: ink.muted };
const bannerStyle: Style = { size: 9, weight: 'bold', colour: ink.lost };
const text: Style = { size: 10.5 };

/** How much of what follows must stand on the same page as its heading, in points. */
function keptWithHeading(flow: Flow, next: ReportNode | undefined): number {
	switch (next?.kind) {
		case 'figure':
			return figureNeeds(flow, next);
		case 'table':
			return tableNeeds(flow, next);
		case 'heading':
			return 80;
		case 'caution':
			return 110;
		default:
			return 48;
	}
}

/** A report tree as a tagged PDF, A4. */
export function renderReport(tree: ReportTree, { createdAt }: RenderOptions): Promise<Buffer> {
	const doc = new PDFDocument({
		size: 'A4',
		margin: 0,
		pdfVersion: '1.7',
		tagged: true,
		lang: tree.language,
		displayTitle: true,
		bufferPages: true,
		// No built-in face is ever taken up: they cannot be embedded.
		font: null,
		info: {
			Title: tree.title,
			Subject: tree.everyPage.name,
			Keywords: `cut ${tree.everyPage.fingerprint}`,
			Creator: 'Heddle',
			Producer: 'Heddle',
			CreationDate: createdAt
		}
	} as unknown as PDFKit.PDFDocumentOptions);
	const done = collect(doc);
	const type = new Type(doc);
	const root = doc.struct('Document', {});
	doc.addStructure(root);
	const { banners, released } = tree.everyPage;
	const top = 58 + banners.length * leading(bannerStyle.size) + (banners.length > 0 ? 6 : 0);
	const bottom = A4.height - (released ? 72 : 60);
	const flow = new Flow(doc, type, root, top, bottom);
	const bookmarks = new Bookmarks(doc);

	drawCover(flow, tree);
	bookmarks.add(1, type.spell(tree.cover.title), top);
	flow.newPage();
	for (const [i, node] of tree.body.entries()) drawNode(flow, node, bookmarks, tree.body[i + 1]);
	root.end();

	const { count } = doc.bufferedPageRange();
	for (let page = 0; page < count; page++) {
		doc.switchToPage(page);
		drawEveryPage(flow, tree, page + 1, count);
	}
	doc.end();
	return done;
}

function collect(doc: Doc): Promise<Buffer> {
	return new Promise((resolve, reject) => {
		const chunks: Buffer[] = [];
		doc.on('data', (chunk: Buffer) => chunks.push(chunk));
		doc.on('end', () => resolve(Buffer.concat(chunks)));
		doc.on('error', reject);
	});
}

/** The outline: level 1 on its own, level 2 beneath the last. */
class Bookmarks {
	private last: PDFKit.PDFOutline | null = null;
	constructor(private readonly doc: Doc) {}

	add(level: 1 | 2, title: string, y: number): void {
		// pdfkit takes `left` from the right-hand edge: the page's width is its left side.
		const options = { expanded: true, top: Math.max(0, y - 12), left: A4.width };
		const parent = level === 2 && this.last ? this.last : this.doc.outline;
		const item = parent.addItem(title, options);
		if (level === 1) this.last = item;
	}
}

function drawNode(
	flow: Flow,
	node: ReportNode,
	bookmarks: Bookmarks,
	next: ReportNode | undefined
): void {
	switch (node.kind) {
		case 'heading': {
			const style: Style = { size: node.level === 1 ? 16 : 12.5, weight: 'bold' };
			flow.space(node.level === 1 ? 18 : 10);
			// A heading never stands alone at the foot of a page.
			flow.need(leading(style.size) + 3 + keptWithHeading(flow, next));
			bookmarks.add(node.level, flow.type.spell(node.text), flow.y);
			flow.text(node.text, style, { tag: node.level === 1 ? 'H2' : 'H3' });
			flow.y += 3;
			return;
		}
		case 'paragraph':
			flow.text(node.text, text);
			flow.y += 5;
			return;
		case 'caution':
			return drawCaution(flow, node);
		case 'definitions':
			return drawDefinitions(flow, node);
		case 'table':
			return drawTable(flow, node);
		case 'figure':
			return drawFigure(flow, node);
	}
}

/** Said beside a bar, so that it is seen; by words, so that the bar is not needed. */
function drawCaution(flow: Flow, node: CautionNode): void {
	const colour = node.tone === 'warning' ? ink.lost : ink.soon;
	const title: Style = { size: 11, weight: 'bold', colour };
	const x = MARGIN + 14;
	const width = WIDTH - 14;
	const height =
		flow.type.lines(node.title, width, title).length * leading(title.size) +
		flow.type.lines(node.text, width, text).length * leading(text.size);
	flow.space(8);
	flow.need(height + 4);
	const from = flow.y;
	const page = flow.doc.page;
	flow.text(node.title, title, { tag: 'P', x, width });
	flow.text(node.text, text, { tag: 'P', x, width });
	// Only a caution longer than a page ends on another one; it goes without its bar.
	if (flow.doc.page === page) {
		flow.artifact(() => {
			flow.doc.rect(MARGIN, from + 2, 3, flow.y - from - 2).fill(colour);
		});
	}
	flow.y += 6;
}

function drawDefinitions(flow: Flow, node: DefinitionsNode): void {
	const { type } = flow;
	const term: Style = { size: 9.5, colour: ink.muted };
	const widest = Math.max(...node.items.map((d) => type.width(type.spell(d.term), term)));
	const left = Math.min(150, widest + 0.5) + 14;
	const list = flow.element('L');
	flow.space(2);
	for (const { term: name, text: said } of node.items) {
		const lines = type.lines(name, left - 14, term).length;
		const says = type.lines(said, WIDTH - left, text).length;
		flow.need(
			Math.min(
				Math.max(lines * leading(term.size), says * leading(text.size)),
				flow.bottom - flow.top
			)
		);
		const item = flow.element('LI', list);
		const start = flow.y;
		const page = flow.doc.page;
		flow.y += drop(text.size) - drop(term.size);
		flow.text(name, term, { tag: 'Lbl', parent: item, width: left - 14 });
		const under = flow.y;
		if (flow.doc.page === page) flow.y = start;
		flow.text(said, text, { tag: 'LBody', parent: item, x: MARGIN + left, width: WIDTH - left });
		if (flow.doc.page === page) flow.y = Math.max(flow.y, under);
		flow.y += 2;
		item.end();
	}
	list.end();
	flow.y += 4;
}

function drawCover(flow: Flow, tree: ReportTree): void {
	const { cover } = tree;
	flow.y += 26;
	flow.text(cover.overline, { size: 13, colour: ink.muted }, { tag: 'P' });
	flow.y += 4;
	flow.text(cover.title, { size: 34, weight: 'bold' }, { tag: 'H1' });
	const style: Style = {
		size: 17,
		weight: 'bold',
		colour: tree.kind === 'closed' ? '#6b3570' : ink.act
	};
	flow.text(cover.subtitle, style, { tag: 'P' });
	flow.y += 14;
	drawThread(flow);
	flow.y += 22;
	drawDefinitions(flow, { kind: 'definitions', items: cover.facts });
	flow.y += 8;
	for (const caution of cover.cautions) drawCaution(flow, caution);
}

/** A thread with its knots: the mark of Heddle, and nothing more. */
function drawThread(flow: Flow): void {
	const { doc, y } = flow;
	flow.artifact(() => {
		doc
			.moveTo(MARGIN, y)
			.lineTo(MARGIN + WIDTH, y)
			.lineWidth(1)
			.strokeColor(ink.act)
			.stroke();
		for (let i = 0; i < 9; i++) {
			const x = MARGIN + 24 + (i * (WIDTH - 48)) / 8;
			doc
				.moveTo(x, y - 5)
				.lineTo(x + 5, y)
				.lineTo(x, y + 5)
				.lineTo(x - 5, y)
				.closePath()
				.fill(ink.act);
		}
	});
}

function drawEveryPage(flow: Flow, tree: ReportTree, page: number, pages: number): void {
	const { type } = flow;
	const { name, banners, fingerprint, released } = tree.everyPage;
	flow.artifact(() => {
		const number = `page ${page} of ${pages}`;
		const numberWidth = type.width(number, small);
		type.draw(type.shorten(name, WIDTH - numberWidth - 20, small), MARGIN, 38, small);
		type.draw(number, MARGIN + WIDTH - numberWidth, 38, small);
		banners.forEach((banner, i) => {
			const y = 54 + i * leading(bannerStyle.size);
			type.draw(type.shorten(banner, WIDTH, bannerStyle), MARGIN, y, bannerStyle);
		});
		const foot = A4.height - (released ? 52 : 40);
		flow.doc
			.moveTo(MARGIN, foot - 12)
			.lineTo(MARGIN + WIDTH, foot - 12)
			.lineWidth(0.75)
			.strokeColor(ink.rule)
			.stroke();
		type.draw(`Cut ${groupedHex(fingerprint)}`, MARGIN, foot, small);
		if (released) {
			// A long name is shortened, the time never is.
			const at = `, ${released.at}`;
			const to = type.shorten(`Copy for ${released.to}`, WIDTH - type.width(at, small), small);
			type.draw(`${to}${at}`, MARGIN, foot + leading(small.size), small);
		}
	}, 'Pagination');
}
