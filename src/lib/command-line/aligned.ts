/** A number for reading: about `digits` figures, a dash for none. */
export function figure(value: number | null | undefined, digits = 5): string {
	if (value === null || value === undefined) return '–';
	if (value !== 0 && Math.abs(value) < 1e-4) return value.toExponential(2);
	return String(Number(value.toPrecision(digits)));
}

/** Rows of cells under their headings, columns set to one width, numbers to the right. */
export function aligned(headings: readonly string[], rows: readonly (readonly string[])[]): string {
	const widths = headings.map((heading, j) =>
		Math.max(heading.length, ...rows.map((row) => row[j]!.length))
	);
	const line = (cells: readonly string[]) =>
		cells
			.map((cell, j) => (j === 0 ? cell.padEnd(widths[j]!) : cell.padStart(widths[j]!)))
			.join('  ')
			.trimEnd();
	return [line(headings), ...rows.map(line)].join('\n');
}
