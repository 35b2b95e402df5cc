import { alignedRows } from './table';

/** A number for reading: about `figures` figures, a dash for none. */
export function figure(value: number | null | undefined, figures = 5): string {
	if (value === null || value === undefined) return '–';
	if (value !== 0 && Math.abs(value) < 1e-4) return value.toExponential(2);
	return String(Number(value.toPrecision(figures)));
}

/** Rows of cells under their headings. */
export const aligned = (headings: readonly string[], rows: readonly (readonly string[])[]) =>
	alignedRows([headings, ...rows]);
