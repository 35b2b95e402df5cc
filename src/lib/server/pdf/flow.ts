import { ink, type Doc, type Style, type Type } from './type';

/** A structure element of the tagged tree. */
export type Element = PDFKit.PDFStructureElement;

export const A4 = { width: 595.28, height: 841.89 } as const;
export const MARGIN = 54;
export const WIDTH = A4.width - 2 * MARGIN;

export const leading = (size: number): number => size * 1.42;
/** From the top of a line to its baseline. */
export const drop = (size: number): number => size * 1.05;

/** The column of text: where the next thing goes, and a new page when it does not fit. */
export class Flow {
	y: number;

	constructor(
		readonly doc: Doc,
		readonly type: Type,
		readonly root: Element,
		readonly top: number,
		readonly bottom: number
	) {
		this.y = top;
	}

	get room(): number {
		return this.bottom - this.y;
	}

	newPage(): void {
		this.doc.addPage();
		this.y = this.top;
	}

	/** Starts a new page unless `height` fits; what is taller than a page starts where it may. */
	need(height: number): void {
		if (height > this.room && this.y > this.top) this.newPage();
	}

	space(height: number): void {
		if (this.y > this.top) this.y += height;
	}

	/** What is drawn inside carries no meaning of its own: rules, bars, repeated heads. */
	artifact(draw: () => void, type?: 'Pagination' | 'Layout'): void {
		this.doc.markContent('Artifact', { type: type ?? 'Layout' });
		draw();
		this.doc.endMarkedContent();
	}

	/** What is drawn inside belongs to `element`. */
	mark(element: Element, tag: string, draw: () => void): void {
		const content = this.doc.markStructureContent(tag);
		draw();
		this.doc.endMarkedContent();
		element.add(content);
	}

	element(
		tag: string,
		parent: Element = this.root,
		options: Record<string, unknown> = {}
	): Element {
		const made = this.doc.struct(tag, options as PDFKit.Mixins.StructureElementOptions);
		parent.add(made);
		return made;
	}

	/** Text as one element, over as many pages as it takes. */
	text(
		text: string,
		style: Style,
		at: { tag: string; parent?: Element; x?: number; width?: number; keepWith?: number } = {
			tag: 'P'
		}
	): void {
		const x = at.x ?? MARGIN;
		const lines = this.type.lines(text, at.width ?? WIDTH, style);
		const step = leading(style.size);
		this.need(Math.min(lines.length, 2) * step + (at.keepWith ?? 0));
		const element = this.element(at.tag, at.parent);
		let rest = lines;
		while (rest.length > 0) {
			const fits = Math.max(1, Math.floor(this.room / step));
			const now = rest.slice(0, fits);
			this.mark(element, at.tag, () => {
				for (const [i, line] of now.entries()) {
					// The space at a line's end keeps words apart for whoever reads the text out.
					const end = this.type.draw(line, x, this.y + drop(style.size), style);
					if (i < now.length - 1 || rest.length > fits) {
						this.type.draw(' ', end, this.y + drop(style.size), style);
					}
					this.y += step;
				}
			});
			rest = rest.slice(fits);
			if (rest.length > 0) this.newPage();
		}
		element.end();
	}

	rule(x: number, width: number, y: number, colour: string = ink.rule, thickness = 0.75): void {
		this.artifact(() => {
			this.doc
				.moveTo(x, y)
				.lineTo(x + width, y)
				.lineWidth(thickness)
				.strokeColor(colour)
				.stroke();
		});
	}
}
