import type { TestedEstimate } from '$lib/stats/types';

/**
 * One way to write a number, for screen and paper alike. A true minus sign (U+2212) everywhere; an
 * absent or non-finite value is written in words, so that it can never pass for a result.
 */

export const MINUS = '−';
export const ABSENT = 'not available';

const signed = (text: string): string => text.replace(/^-(?=0(\.0*)?$)/, '').replace('-', MINUS);

/** `value` with exactly `decimals` places; −0 is written 0. */
export function fixed(value: number | null | undefined, decimals: number): string {
	if (value === null || value === undefined || !Number.isFinite(value)) return ABSENT;
	return signed(value.toFixed(Math.min(12, Math.max(0, decimals))));
}

/**
 * Decimal places that show `scale` to `significant` significant digits (0 to 8 places). An estimate
 * and its interval are printed to the places of their standard error: digits finer than a
 * hundredth of the uncertainty say nothing. common practice
 */
export function decimalsFor(scale: number | null | undefined, significant = 3): number {
	if (scale === null || scale === undefined || !Number.isFinite(scale) || scale === 0) return 3;
	// Through toPrecision, so that 0.09996 counts as 0.100.
	const exponent = Number(
		Math.abs(scale)
			.toExponential(significant - 1)
			.split('e')[1]
	);
	return Math.min(8, Math.max(0, significant - 1 - exponent));
}

/** `value` to `significant` significant digits, without an exponent; trailing zeros are kept. */
export function significant(value: number | null | undefined, digits = 4): string {
	if (value === null || value === undefined || !Number.isFinite(value)) return ABSENT;
	return value === 0 ? '0' : fixed(value, decimalsFor(value, digits));
}

/** A whole number with thousands grouped: 1,127. */
export function count(value: number | null | undefined): string {
	if (value === null || value === undefined || !Number.isFinite(value)) return ABSENT;
	return signed(
		Math.round(value)
			.toString()
			.replace(/\B(?=(\d{3})+$)/g, ',')
	);
}

/** A p-value to four places, its far ends as bounds: 0.0141, <0.0001, >0.9999. */
export function pValue(p: number | null | undefined): string {
	if (p === null || p === undefined || !Number.isFinite(p) || p < 0 || p > 1) return ABSENT;
	if (p < 0.0001) return '<0.0001';
	if (p > 0.9999) return '>0.9999';
	return p.toFixed(4);
}

export const degreesOfFreedom = (df: number | null | undefined): string =>
	df === Infinity ? 'none (large sample)' : fixed(df, 1);

export const tStatistic = (t: number | null | undefined): string => fixed(t, 2);

/** "a to b", never a dash, which beside a minus sign is unreadable. */
export function interval(lower: number, upper: number, decimals: number): string {
	if (!Number.isFinite(lower) || !Number.isFinite(upper)) return ABSENT;
	return `${fixed(lower, decimals)} to ${fixed(upper, decimals)}`;
}

/** The six printed cells of one estimate; a test or a screen that wants the printed digits calls this. */
export function estimateCells(row: TestedEstimate) {
	const decimals = decimalsFor(row.standardError);
	return {
		estimate: fixed(row.estimate, decimals),
		se: fixed(row.standardError, decimals),
		interval: interval(row.lower, row.upper, decimals),
		df: degreesOfFreedom(row.df),
		t: tStatistic(row.t),
		p: pValue(row.p)
	};
}

/** A hexadecimal hash in groups of four, so that two copies can be compared by eye. */
export const groupedHex = (hex: string): string => hex.replace(/(.{4})(?=.)/g, '$1 ');

const two = (n: number) => String(n).padStart(2, '0');
const MONTHS =
	'January February March April May June July August September October November December'.split(
		' '
	);

/** An instant in words with its zone: "1 June 2026, 06:00 UTC". Seconds are shown when there are any. */
export function instant(iso: string): string {
	const at = new Date(iso);
	if (Number.isNaN(at.getTime())) throw new RangeError(`not an instant: ${iso}`);
	const seconds = at.getUTCSeconds() ? `:${two(at.getUTCSeconds())}` : '';
	return `${at.getUTCDate()} ${MONTHS[at.getUTCMonth()]} ${at.getUTCFullYear()}, ${two(at.getUTCHours())}:${two(at.getUTCMinutes())}${seconds} UTC`;
}
