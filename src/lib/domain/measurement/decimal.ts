/**
 * Numbers as people type them: digits with at most one point or comma before the decimals, and a sign. No thousands
 * separators and no exponents, because '1,234' would then mean two things.
 */
export type Decimal = { value: number; decimals: number };

const shape = /^([+\-−]?)(\d{1,15})(?:[.,](\d{0,12}))?$/;

/** The number and how many decimals were typed (trailing zeros count), or null. */
export function readDecimal(text: string): Decimal | null {
	const match = shape.exec(text.trim());
	if (!match) return null;
	const [, sign, whole, fraction = ''] = match;
	const value = Number(`${whole}.${fraction || '0'}`);
	const signed = sign === '-' || sign === '−' ? -value : value;
	return { value: signed === 0 ? 0 : signed, decimals: fraction.length };
}

/** The same for what a program sends: finite, and with as many decimals as its shortest text has. */
export function decimalOf(value: number): Decimal | null {
	if (!Number.isFinite(value)) return null;
	const [digits = '', exponent = '0'] = String(value).split('e');
	const typed = digits.split('.')[1]?.length ?? 0;
	return { value: value === 0 ? 0 : value, decimals: Math.max(0, typed - Number(exponent)) };
}
