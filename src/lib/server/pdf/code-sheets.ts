import PDFDocument from 'pdfkit';
import { A4, Flow, leading, MARGIN } from './flow';
import { ink, Type, type Doc, type Style } from './type';

export interface CodeSheet {
	study: string;
	site: string;
	kit: string;
	/** Which of how many: a missing sheet shows. */
	number: number;
	of: number;
	arm: string;
	code: string;
}

const text: Style = { size: 11 };
const small: Style = { size: 9, colour: ink.muted };
const bold: Style = { size: 13, weight: 'bold' };
const large: Style = { size: 22, weight: 'bold', tabular: true };

/** What stands outside, and is read before anything is opened. */
const outside = [
	'For an emergency in which care depends on knowing the treatment, and only while Heddle cannot be reached. While it can, the investigator asks there, from the subject’s record.',
	'Only the qualified investigator, or somebody to whom this was delegated, opens it. Opening cannot be undone, concerns this one kit, and is told to nobody who needs not know.',
	'As soon as Heddle can be reached again: open the subject’s record, choose “Emergency unmasking”, and enter when it was opened, why, and the code from inside. The code is taken once.',
	'Monitors count the sealed envelopes at each visit. One that was opened, torn or is missing without a record is reported.'
];

/**
 * Sheets for sealed envelopes, one page for each kit. The upper half goes outside, the lower half inside: it is folded in
 * before anybody at the site sees it.
 */
export function renderCodeSheets(sheets: readonly CodeSheet[], createdAt: Date): Promise<Buffer> {
	const doc = new PDFDocument({
		size: 'A4',
		margin: 0,
		pdfVersion: '1.7',
		tagged: true,
		lang: 'en',
		displayTitle: true,
		bufferPages: true,
		font: null,
		info: {
			Title: 'Sealed codes',
			Creator: 'Heddle',
			Producer: 'Heddle',
			CreationDate: createdAt
		}
	} as unknown as PDFKit.PDFDocumentOptions) as Doc;
	const done = new Promise<Buffer>((resolve, reject) => {
		const chunks: Buffer[] = [];
		doc.on('data', (chunk: Buffer) => chunks.push(chunk));
		doc.on('end', () => resolve(Buffer.concat(chunks)));
		doc.on('error', reject);
	});
	const type = new Type(doc);
	const root = doc.struct('Document', {});
	doc.addStructure(root);
	const flow = new Flow(doc, type, root, 58, A4.height - 54);
	for (const [at, sheet] of sheets.entries()) {
		if (at > 0) flow.newPage();
		drawSheet(flow, sheet);
	}
	root.end();
	doc.end();
	return done;
}

function drawSheet(flow: Flow, sheet: CodeSheet): void {
	flow.text(`Sealed code · kit ${sheet.kit}`, { size: 18, weight: 'bold' }, { tag: 'H1' });
	flow.y += 4;
	flow.text(`${sheet.study} · ${sheet.site} · sheet ${sheet.number} of ${sheet.of}`, text);
	flow.y += 10;
	for (const paragraph of outside) {
		flow.text(paragraph, text);
		flow.y += 6;
	}
	flow.y = A4.height / 2;
	flow.artifact(() => {
		flow.doc
			.moveTo(MARGIN, flow.y)
			.lineTo(A4.width - MARGIN, flow.y)
			.dash(4, { space: 4 })
			.lineWidth(0.8)
			.strokeColor(ink.muted)
			.stroke()
			.undash();
	});
	flow.y += 8;
	flow.text(
		'Fold here, this half inward, then once more. Into an opaque envelope, sealed; the kit number and a signature across the seal.',
		small
	);
	flow.y += 40;
	flow.text('Inside', bold, { tag: 'H2' });
	flow.y += 6;
	flow.text(`Kit ${sheet.kit} holds`, text);
	flow.text(sheet.arm, large);
	flow.y += leading(text.size);
	flow.text('Code to enter afterwards', text);
	flow.text(sheet.code, large);
}
