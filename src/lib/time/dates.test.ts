import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import {
	addDays,
	addMonths,
	ageInYears,
	dateText,
	daysBetween,
	findPartialDate,
	findPlainDate,
	isoWeekText,
	mondayOf,
	plainDateOf,
	shortDateText,
	studyDay
} from './dates';

const d = plainDateOf;

describe('dates', () => {
	it('refuses days that do not exist and other spellings', () => {
		for (const text of [
			'2026-02-30',
			'2026-02-29',
			'2026-13-01',
			'2026-00-10',
			'2026-04-31',
			'0000-01-01'
		])
			expect(findPlainDate(text), text).toBeNull();
		for (const text of [
			'2026-2-3',
			'20260203',
			'2026-02-03T00:00',
			' 2026-02-03',
			'2026-02-03\n',
			'+2026-02-03'
		])
			expect(findPlainDate(text), text).toBeNull();
		for (const text of ['2024-02-29', '2000-02-29', '2026-12-31'])
			expect(findPlainDate(text), text).toBe(text);
		expect(findPlainDate('1900-02-29')).toBeNull();
		expect(() => d('2026-02-30')).toThrow(RangeError);
	});

	// Computed by hand from the Gregorian calendar.
	it('adds days across months and leap days', () => {
		const anchor = d('2026-01-15');
		expect(addDays(anchor, 28)).toBe('2026-02-12');
		expect(addDays(addDays(anchor, 28), -3)).toBe('2026-02-09');
		expect(addDays(addDays(anchor, 28), 7)).toBe('2026-02-19');
		expect(addDays(anchor, 84)).toBe('2026-04-09');
		expect(addDays(anchor, 182)).toBe('2026-07-16');
		expect(addDays(anchor, 364)).toBe('2027-01-14');
		expect(addDays(d('2028-02-01'), 28)).toBe('2028-02-29');
		expect(addDays(d('2028-02-01'), 29)).toBe('2028-03-01');
		expect(() => addDays(anchor, 1.5)).toThrow(RangeError);
	});

	it('steps months to the same day or the month’s last, from the anchor', () => {
		expect(addMonths(d('2026-01-31'), 1)).toBe('2026-02-28');
		expect(addMonths(d('2026-01-31'), 2)).toBe('2026-03-31');
		expect(addMonths(d('2024-02-29'), 12)).toBe('2025-02-28');
		expect(addMonths(d('2024-02-29'), 48)).toBe('2028-02-29');
		expect(addMonths(d('2026-03-31'), -1)).toBe('2026-02-28');
	});

	it('daysBetween undoes addDays', () => {
		fc.assert(
			fc.property(fc.integer({ min: -200_000, max: 200_000 }), (days) => {
				expect(daysBetween(d('2026-01-15'), addDays(d('2026-01-15'), days))).toBe(days);
			})
		);
	});

	// SDTM study day: the reference day is 1, the day before it −1, no zero.
	it.each([
		['2026-02-28', -1],
		['2026-03-01', 1],
		['2026-03-02', 2],
		['2026-03-29', 29]
	])('study day of %s from 2026-03-01 is %i', (date, day) => {
		expect(studyDay(d(date), d('2026-03-01'))).toBe(day);
	});

	it('age is in completed years, and a 29 February birthday follows the chosen rule', () => {
		expect(ageInYears(d('2000-06-15'), d('2026-06-14'))).toBe(25);
		expect(ageInYears(d('2000-06-15'), d('2026-06-15'))).toBe(26);
		expect(ageInYears(d('2008-02-29'), d('2026-02-28'), '28 February')).toBe(18);
		expect(ageInYears(d('2008-02-29'), d('2026-02-28'), '1 March')).toBe(17);
		expect(ageInYears(d('2008-02-29'), d('2026-03-01'), '1 March')).toBe(18);
		expect(ageInYears(d('2008-02-29'), d('2024-02-28'))).toBe(15);
		expect(ageInYears(d('2008-02-29'), d('2024-02-29'))).toBe(16);
	});

	it('keeps partial dates partial', () => {
		expect(findPartialDate('2000')).toBe('2000');
		expect(findPartialDate('2000-06')).toBe('2000-06');
		expect(findPartialDate('2000-06-15')).toBe('2000-06-15');
		for (const text of ['2000-13', '2000-06-31', '00', ''])
			expect(findPartialDate(text)).toBeNull();
	});

	// ISO 8601 week dates around the turn of the year.
	it.each([
		['2026-12-31', '2026-W53-4'],
		['2027-01-01', '2026-W53-5'],
		['2024-12-30', '2025-W01-1'],
		['2023-01-01', '2022-W52-7']
	])('ISO week of %s is %s', (date, week) => {
		expect(isoWeekText(d(date))).toBe(week);
	});

	it('names days for people', () => {
		expect(dateText(d('2026-06-09'))).toBe('Tue 9 June 2026');
		expect(shortDateText(d('2026-06-09'))).toBe('9 Jun 2026');
		expect(mondayOf(d('2026-06-14'))).toBe('2026-06-08');
		expect(mondayOf(d('2026-06-08'))).toBe('2026-06-08');
	});
});
