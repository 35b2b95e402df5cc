import { quantityOf, unitOf, unitText, type UnitCode } from './units';

/** A measured number never travels alone. */
export type Quantity<U extends UnitCode = UnitCode> = { value: number; unit: U };

/**
 * Substances whose mass and molar concentrations convert into each other, with the one factor used everywhere:
 * µmol/L = mg/dL × factor. Some tables use 18 for glucose and 88.42 for creatinine; Heddle does not.
 */
export const analytes = {
	creatinine: {
		name: 'creatinine',
		micromolesPerMgDl: 88.4,
		note: 'µmol/L = mg/dL × 88.4 (113.12 g/mol)'
	},
	glucose: {
		name: 'glucose',
		micromolesPerMgDl: 1000 / 18.016,
		note: 'mmol/L = mg/dL ÷ 18.016 (180.16 g/mol)'
	}
} as const;

export type Analyte = keyof typeof analytes;
export const analyteKeys = Object.keys(analytes) as [Analyte, ...Analyte[]];

/** Whether a value in one unit can be said in the other; some pairs need to know the substance. */
export function converts(from: UnitCode, to: UnitCode, analyte?: Analyte): boolean {
	if (quantityOf(from) === quantityOf(to)) return true;
	const pair = new Set<string>([quantityOf(from), quantityOf(to)]);
	return (
		analyte !== undefined && pair.has('mass concentration') && pair.has('substance concentration')
	);
}

/** The value in another unit, unrounded. Throws when the units do not convert: ask `converts` first. */
export function convert(value: number, from: UnitCode, to: UnitCode, analyte?: Analyte): number {
	if (from === to) return value;
	if (!converts(from, to, analyte)) throw new RangeError(`${from} does not convert to ${to}`);
	const source = unitOf(from);
	const target = unitOf(to);
	let base = value * source.factor + (source.offset ?? 0);
	if (source.quantity !== target.quantity && analyte) {
		const millimolesPerMgDl = analytes[analyte].micromolesPerMgDl / 1000;
		base =
			source.quantity === 'mass concentration'
				? base * millimolesPerMgDl
				: base / millimolesPerMgDl;
	}
	return (base - (target.offset ?? 0)) / target.factor;
}

/** A difference or a standard deviation in another unit: offsets (°F) play no part. */
export function convertDifference(
	value: number,
	from: UnitCode,
	to: UnitCode,
	analyte?: Analyte
): number {
	return convert(value, from, to, analyte) - convert(0, from, to, analyte);
}

/** The sum; both in the same unit, or it does not compile. */
export function sum<U extends UnitCode>(a: Quantity<U>, b: Quantity<NoInfer<U>>): Quantity<U> {
	if (a.unit !== b.unit) throw new RangeError(`${a.unit} and ${b.unit} do not add`);
	return { value: a.value + b.value, unit: a.unit };
}

/** Rounds half away from zero on the decimal digits people see: 1.005 to two decimals is 1.01. */
export function roundTo(value: number, decimals: number): number {
	if (!Number.isFinite(value)) return value;
	const size = Math.abs(value);
	const shifted = shift(Math.round(shift(size, decimals)), -decimals);
	return value < 0 && shifted !== 0 ? -shifted : shifted;
}

/** Times a power of ten, by moving the point in the text rather than multiplying. */
function shift(value: number, places: number): number {
	const [digits = '0', exponent = '0'] = String(value).split('e');
	return Number(`${digits}e${Number(exponent) + places}`);
}

/** '−1.50': fixed decimals, with a true minus sign. */
export function numberText(value: number, decimals: number): string {
	return roundTo(value, decimals).toFixed(decimals).replace('-', '−');
}

/** '141 µmol/L' */
export function quantityText(value: number, unit: UnitCode, decimals: number): string {
	const text = unitText(unit);
	return text === '' ? numberText(value, decimals) : `${numberText(value, decimals)} ${text}`;
}
