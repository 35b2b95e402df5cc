import { describe, expect, test } from 'vitest';
import {
	ABSENT,
	count,
	decimalsFor,
	degreesOfFreedom,
	estimateCells,
	fixed,
	groupedHex,
	instant,
	interval,
	pValue,
	significant
} from './format';

describe('one way to write a number', () => {
	test('a negative number has a true minus sign, and nothing rounds to minus zero', () => {
		expect(fixed(-0.30483, 3)).toBe('−0.305');
		expect(fixed(-0.0004, 3)).toBe('0.000');
		expect(fixed(-0, 0)).toBe('0');
		expect(fixed(-0.0005001, 3)).toBe('−0.001');
	});

	test('what is absent or not finite is said in words', () => {
		for (const value of [null, undefined, NaN, Infinity, -Infinity]) {
			expect(fixed(value, 2)).toBe(ABSENT);
			expect(significant(value)).toBe(ABSENT);
			expect(pValue(value)).toBe(ABSENT);
		}
		expect(interval(-Infinity, 2, 1)).toBe(ABSENT);
		expect(degreesOfFreedom(Infinity)).toBe('none (large sample)');
	});

	test.each([
		[0.12142, 3],
		[0.0775, 4],
		[0.09996, 3],
		[0.9996, 2],
		[1.537, 2],
		[42.7, 1],
		[512, 0],
		[1e-12, 8],
		[0, 3],
		[NaN, 3]
	])('a standard error of %d is printed to %d places', (se, places) => {
		expect(decimalsFor(se)).toBe(places);
	});

	test.each([
		[0.0141, '0.0141'],
		[0.00009999, '<0.0001'],
		[0.0001, '0.0001'],
		[0, '<0.0001'],
		[1, '>0.9999'],
		[0.5, '0.5000'],
		[1.2, ABSENT],
		[-0.1, ABSENT]
	])('p = %d is printed %s', (p, text) => {
		expect(pValue(p)).toBe(text);
	});

	test('an estimate and its interval are printed to the places of the standard error', () => {
		expect(
			estimateCells({
				estimate: -0.3048295,
				standardError: 0.1214209,
				df: 79,
				t: -2.51052,
				p: 0.0141,
				lower: -0.5465096,
				upper: -0.0631494
			})
		).toEqual({
			estimate: '−0.305',
			se: '0.121',
			interval: '−0.547 to −0.063',
			df: '79.0',
			t: '−2.51',
			p: '0.0141'
		});
	});

	test('counts are grouped by thousands', () => {
		expect([0, 999, 1127, 1234567].map(count)).toEqual(['0', '999', '1,127', '1,234,567']);
	});

	test('a hash is grouped in fours, with no space at its end', () => {
		expect(groupedHex('7c1e90ab44d2')).toBe('7c1e 90ab 44d2');
	});

	test('an instant is written in UTC whatever zone the machine is in', () => {
		expect(instant('2026-06-01T00:30:00+02:00')).toBe('31 May 2026, 22:30 UTC');
		expect(instant('2026-06-01T06:04:09Z')).toBe('1 June 2026, 06:04:09 UTC');
		expect(() => instant('yesterday')).toThrow(RangeError);
	});
});
