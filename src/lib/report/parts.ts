import type { NoteCode } from '$lib/stats/types';
import { count } from './format';
import type { LookReportInput } from './input';
import { chosen } from './names';
import type { ReportNode } from './tree';

export const heading = (text: string, level: 1 | 2 = 1): ReportNode => ({
	kind: 'heading',
	level,
	text
});
export const paragraph = (text: string): ReportNode => ({ kind: 'paragraph', text });

/** The engine's own sentences about what `codes` name. */
export const notes = (input: LookReportInput, ...codes: NoteCode[]): ReportNode[] =>
	input.result.notes.filter((n) => codes.includes(n.code)).map((n) => paragraph(n.sentence));

export const percent = (confidence: number): string => `${chosen(confidence * 100)}%`;
export const plural = (n: number, one: string): string => `${count(n)} ${one}${n === 1 ? '' : 's'}`;
export const inBrackets = (label: string, unit: string): string =>
	unit ? `${label} (${unit})` : label;

export const METHOD = {
	REML: 'restricted maximum likelihood (REML)',
	ML: 'maximum likelihood (ML)'
} as const;
export const DF = {
	'kenward-roger': 'Kenward–Roger',
	satterthwaite: 'Satterthwaite',
	naive: 'measurements minus coefficients'
} as const;
