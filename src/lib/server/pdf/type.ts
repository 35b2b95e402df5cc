import type PDFDocument from 'pdfkit';
import { face } from './faces';
import { spell } from './spelling';

export type Doc = InstanceType<typeof PDFDocument>;
export type Weight = 'regular' | 'bold';

export interface Style {
	size: number;
	weight?: Weight;
	colour?: string;
	/** Figures of one width, for columns. */
	tabular?: boolean;
}

interface Run {
	text: string;
	face: string;
}

/** The face that has the rest of the Latin letters lacks the common ones, so a line is drawn in runs. */
export class Type {
	private readonly main: (codePoint: number) => boolean;
	private readonly rest: (codePoint: number) => boolean;

	constructor(readonly doc: Doc) {
		doc.registerFont('regular', face('latin', 400));
		doc.registerFont('regular-rest', face('latin-ext', 400));
		doc.registerFont('bold', face('latin', 700));
		doc.registerFont('bold-rest', face('latin-ext', 700));
		const glyphs = (name: string) => {
			const { font } = (
				doc.font(name) as unknown as {
					_font: { font: { hasGlyphForCodePoint(c: number): boolean } };
				}
			)._font;
			return (c: number) => font.hasGlyphForCodePoint(c);
		};
		this.rest = glyphs('regular-rest');
		this.main = glyphs('regular');
	}

	spell(text: string): string {
		return spell(text, (c) => this.main(c) || this.rest(c));
	}

	runs(text: string, weight: Weight = 'regular'): Run[] {
		const runs: Run[] = [];
		for (const c of text) {
			const face = this.main(c.codePointAt(0)!) ? weight : `${weight}-rest`;
			const last = runs.at(-1);
			if (last?.face === face) last.text += c;
			else runs.push({ text: c, face });
		}
		return runs;
	}

	private features(style: Style, face: string): PDFKit.Mixins.OpenTypeFeatures[] | undefined {
		return style.tabular && !face.endsWith('-rest') ? ['tnum', 'kern'] : undefined;
	}

	/** Width in points of `text`, which must have been spelled. */
	width(text: string, style: Style): number {
		return this.runs(text, style.weight).reduce((sum, run) => {
			this.doc.font(run.face, style.size);
			return sum + this.doc.widthOfString(run.text, { features: this.features(style, run.face) });
		}, 0);
	}

	/** `text` in lines no wider than `width`; a word that is wider is cut. */
	lines(text: string, width: number, style: Style): string[] {
		const lines: string[] = [];
		let line = '';
		const space = this.width(' ', style);
		let used = 0;
		for (const word of this.spell(text).split(/ +/)) {
			if (word === '') continue;
			for (const part of this.parts(word, width, style)) {
				const wide = this.width(part, style);
				if (line === '') {
					line = part;
					used = wide;
				} else if (used + space + wide <= width) {
					line += ` ${part}`;
					used += space + wide;
				} else {
					lines.push(line);
					line = part;
					used = wide;
				}
			}
		}
		if (line !== '' || lines.length === 0) lines.push(line);
		return lines;
	}

	private parts(word: string, width: number, style: Style): string[] {
		if (this.width(word, style) <= width) return [word];
		const parts: string[] = [];
		let part = '';
		for (const c of word) {
			if (part !== '' && this.width(part + c, style) > width) {
				parts.push(part);
				part = '';
			}
			part += c;
		}
		if (part !== '') parts.push(part);
		return parts;
	}

	/** `text` on one line, shortened with an ellipsis when it is wider than `width`. */
	shorten(text: string, width: number, style: Style): string {
		const spelled = this.spell(text);
		if (this.width(spelled, style) <= width) return spelled;
		const letters = [...spelled];
		while (letters.length > 0 && this.width(`${letters.join('')}…`, style) > width) letters.pop();
		return `${letters.join('').trimEnd()}…`;
	}

	/** Draws a spelled line with its baseline at `y`; gives back the x where it ends. */
	draw(text: string, x: number, y: number, style: Style): number {
		let at = x;
		for (const run of this.runs(text, style.weight)) {
			const features = this.features(style, run.face);
			this.doc.font(run.face, style.size).fillColor(style.colour ?? ink.ink);
			const wide = this.doc.widthOfString(run.text, { features });
			this.doc.text(run.text, at, y, {
				lineBreak: false,
				baseline: 'alphabetic',
				features
			});
			at += wide;
		}
		return at;
	}
}

/** The tokens of the light theme, as ink on paper. */
export const ink = {
	ink: '#16213f',
	muted: '#54402f',
	rule: '#d9cdb8',
	ruleStrong: '#94856d',
	wash: '#f3ede1',
	act: '#28396b',
	soon: '#7a5a00',
	lost: '#9c2f26'
} as const;
