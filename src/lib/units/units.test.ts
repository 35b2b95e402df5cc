import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import {
	convert,
	convertDifference,
	converts,
	quantityText,
	roundTo,
	sum,
	type Analyte
} from './convert';
import { isUnit, quantityOf, unitCodes, unitText, type UnitCode } from './units';

describe('units', () => {
	it('knows the common codes of UCUM', () => {
		const codes =
			'kg [lb_av] cm [in_i] Cel [degF] mm[Hg] /min % kg/m2 m2 mmol/L umol/L mg/dL g/dL 10*9/L mL/min/{1.73_m2}';
		for (const code of codes.split(' ')) expect(isUnit(code), code).toBe(true);
		for (const code of ['KG', 'mmHg', 'toString', '']) expect(isUnit(code)).toBe(false);
	});

	it('shows them as people write them', () => {
		expect(unitText('umol/L')).toBe('µmol/L');
		expect(unitText('mL/min/{1.73_m2}')).toBe('mL/min/1.73 m²');
		expect(quantityText(141, 'umol/L', 0)).toBe('141 µmol/L');
		expect(quantityText(-1.25, 'kg', 1)).toBe('−1.3 kg');
		expect(quantityText(3, '1', 1)).toBe('3.0');
	});

	// Pound and inch: exact, UCUM tables. Temperatures: definition of the Fahrenheit scale.
	// Glucose 180.16 g/mol and creatinine 113.12 g/mol (common practice), one fixed factor each.
	it.each<[number, UnitCode, UnitCode, number, number, Analyte?]>([
		[150, '[lb_av]', 'kg', 68.04, 2],
		[70, '[in_i]', 'cm', 177.8, 1],
		[98.6, '[degF]', 'Cel', 37.0, 1],
		[38.0, 'Cel', '[degF]', 100.4, 1],
		[-40, '[degF]', 'Cel', -40, 9],
		[100, 'mg/dL', 'mmol/L', 5.55, 2, 'glucose'],
		[126, 'mg/dL', 'mmol/L', 6.99, 2, 'glucose'],
		[7.0, 'mmol/L', 'mg/dL', 126.1, 1, 'glucose'],
		[1.0, 'mg/dL', 'umol/L', 88.4, 9, 'creatinine'],
		[100, 'umol/L', 'mg/dL', 1.13, 2, 'creatinine'],
		[120, 'mm[Hg]', 'kPa', 16.0, 1],
		[2, 'a', 'mo', 24, 9],
		[36, 'h', 'd', 1.5, 9]
	])('%d %s to %s is %d', (value, from, to, expected, decimals, analyte) => {
		expect(roundTo(convert(value, from, to, analyte), decimals)).toBe(expected);
	});

	it('does not convert what has no fixed relation', () => {
		expect(converts('mg/dL', 'mmol/L')).toBe(false);
		expect(converts('mg/dL', 'mmol/L', 'glucose')).toBe(true);
		expect(converts('kg', 'cm', 'glucose')).toBe(false);
		expect(converts('mo', 'd')).toBe(false);
		expect(() => convert(1, 'kg', 'cm')).toThrow(RangeError);
	});

	it('a difference of temperatures has no offset', () => {
		expect(roundTo(convertDifference(1.8, '[degF]', 'Cel'), 9)).toBe(1);
	});

	it('comes back to where it started', () => {
		fc.assert(
			fc.property(
				fc.constantFrom(...unitCodes),
				fc.constantFrom(...unitCodes),
				fc.double({ min: -1e6, max: 1e6, noNaN: true }),
				(from, to, value) => {
					fc.pre(converts(from, to));
					const back = convert(convert(value, from, to), to, from);
					expect(Math.abs(back - value)).toBeLessThanOrEqual(1e-9 * Math.max(1, Math.abs(value)));
				}
			)
		);
	});

	it('adds like to like only, already for the compiler', () => {
		expect(sum({ value: 1, unit: 'kg' }, { value: 2, unit: 'kg' })).toEqual({
			value: 3,
			unit: 'kg'
		});
		// @ts-expect-error a pressure is no mass
		expect(() => sum({ value: 1, unit: 'kg' }, { value: 2, unit: 'mm[Hg]' })).toThrow(RangeError);
		expect(quantityOf('kg')).toBe('mass');
	});

	it('rounds half away from zero on the digits people see', () => {
		expect(roundTo(1.005, 2)).toBe(1.01);
		expect(roundTo(-1.005, 2)).toBe(-1.01);
		expect(roundTo(2.5, 0)).toBe(3);
		expect(Object.is(roundTo(-0.001, 2), 0)).toBe(true);
		expect(roundTo(1e21, 2)).toBe(1e21);
	});
});
