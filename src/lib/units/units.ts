/**
 * The units Heddle knows, by their UCUM code (ucum.org, case-sensitive codes). The code is stored; the text is shown.
 * A value in a unit is `value × factor + offset` of its quantity's base unit.
 * Factors are exact definitions unless the source says otherwise.
 */
type Definition = {
	text: string;
	quantity: string;
	factor: number;
	offset?: number;
	/** Read aloud or spelled out where a symbol may be unclear. */
	name: string;
};

const definitions = {
	// Mass; base kilogram. The pound is exactly 0.45359237 kg, the inch exactly 2.54 cm (UCUM tables).
	kg: { text: 'kg', name: 'kilograms', quantity: 'mass', factor: 1 },
	g: { text: 'g', name: 'grams', quantity: 'mass', factor: 1e-3 },
	mg: { text: 'mg', name: 'milligrams', quantity: 'mass', factor: 1e-6 },
	'[lb_av]': { text: 'lb', name: 'pounds', quantity: 'mass', factor: 0.45359237 },
	// Length; base metre
	m: { text: 'm', name: 'metres', quantity: 'length', factor: 1 },
	cm: { text: 'cm', name: 'centimetres', quantity: 'length', factor: 1e-2 },
	mm: { text: 'mm', name: 'millimetres', quantity: 'length', factor: 1e-3 },
	'[in_i]': { text: 'in', name: 'inches', quantity: 'length', factor: 0.0254 },
	// Temperature; base degree Celsius
	Cel: { text: '°C', name: 'degrees Celsius', quantity: 'temperature', factor: 1 },
	'[degF]': {
		text: '°F',
		name: 'degrees Fahrenheit',
		quantity: 'temperature',
		factor: 5 / 9,
		offset: -160 / 9
	},
	// Pressure; base kilopascal. UCUM defines m[Hg] as 133.322 kPa.
	kPa: { text: 'kPa', name: 'kilopascals', quantity: 'pressure', factor: 1 },
	'mm[Hg]': {
		text: 'mmHg',
		name: 'millimetres of mercury',
		quantity: 'pressure',
		factor: 0.133322
	},
	// Rate; base per minute
	'/min': { text: '/min', name: 'per minute', quantity: 'rate', factor: 1 },
	// Share; base one
	'1': { text: '', name: 'no unit', quantity: 'ratio', factor: 1 },
	'%': { text: '%', name: 'per cent', quantity: 'ratio', factor: 0.01 },
	'{score}': { text: 'points', name: 'points', quantity: 'score', factor: 1 },
	'{count}': { text: 'count', name: 'count', quantity: 'count', factor: 1 },
	// Area, and mass over area
	m2: { text: 'm²', name: 'square metres', quantity: 'area', factor: 1 },
	'kg/m2': {
		text: 'kg/m²',
		name: 'kilograms per square metre',
		quantity: 'mass per area',
		factor: 1
	},
	// Amount of substance in a volume; base mmol/L
	'mmol/L': {
		text: 'mmol/L',
		name: 'millimoles per litre',
		quantity: 'substance concentration',
		factor: 1
	},
	'umol/L': {
		text: 'µmol/L',
		name: 'micromoles per litre',
		quantity: 'substance concentration',
		factor: 1e-3
	},
	'nmol/L': {
		text: 'nmol/L',
		name: 'nanomoles per litre',
		quantity: 'substance concentration',
		factor: 1e-6
	},
	// Mass in a volume; base mg/dL
	'mg/dL': {
		text: 'mg/dL',
		name: 'milligrams per decilitre',
		quantity: 'mass concentration',
		factor: 1
	},
	'g/dL': {
		text: 'g/dL',
		name: 'grams per decilitre',
		quantity: 'mass concentration',
		factor: 1000
	},
	'g/L': { text: 'g/L', name: 'grams per litre', quantity: 'mass concentration', factor: 100 },
	'mg/L': {
		text: 'mg/L',
		name: 'milligrams per litre',
		quantity: 'mass concentration',
		factor: 0.1
	},
	'10*9/L': {
		text: '×10⁹/L',
		name: 'thousand million per litre',
		quantity: 'cell concentration',
		factor: 1
	},
	'U/L': {
		text: 'U/L',
		name: 'enzyme units per litre',
		quantity: 'enzyme concentration',
		factor: 1
	},
	'mL/min/{1.73_m2}': {
		text: 'mL/min/1.73 m²',
		name: 'millilitres per minute per 1.73 square metres',
		quantity: 'filtration rate',
		factor: 1
	},
	'mL/min': {
		text: 'mL/min',
		name: 'millilitres per minute',
		quantity: 'volume rate',
		factor: 1
	},
	'm/s': { text: 'm/s', name: 'metres per second', quantity: 'speed', factor: 1 },
	// Time; base day. Months and years have no fixed length in days and so do not convert to days here.
	d: { text: 'd', name: 'days', quantity: 'time', factor: 1 },
	wk: { text: 'wk', name: 'weeks', quantity: 'time', factor: 7 },
	h: { text: 'h', name: 'hours', quantity: 'time', factor: 1 / 24 },
	min: { text: 'min', name: 'minutes', quantity: 'time', factor: 1 / 1440 },
	s: { text: 's', name: 'seconds', quantity: 'time', factor: 1 / 86_400 },
	ms: { text: 'ms', name: 'milliseconds', quantity: 'time', factor: 1 / 86_400_000 },
	mo: { text: 'mo', name: 'months', quantity: 'calendar time', factor: 1 },
	a: { text: 'y', name: 'years', quantity: 'calendar time', factor: 12 }
} as const satisfies Record<string, Definition>;

export type UnitCode = keyof typeof definitions;
export type QuantityKind = (typeof definitions)[UnitCode]['quantity'];

export const unitCodes = Object.keys(definitions) as [UnitCode, ...UnitCode[]];

export const isUnit = (code: string): code is UnitCode => Object.hasOwn(definitions, code);

export function unitOf(code: UnitCode): Definition & { code: UnitCode } {
	return { code, ...(definitions[code] as Definition) };
}

/** 'µmol/L' for 'umol/L' */
export const unitText = (code: UnitCode): string => definitions[code].text;

export const quantityOf = (code: UnitCode): QuantityKind => definitions[code].quantity;
