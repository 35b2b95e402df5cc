import { afterEach, describe, expect, it } from 'vitest';
import { addDays, plainDateOf } from './dates';
import { clock } from './clock';
import {
	addHours,
	dateInZone,
	dayInZone,
	instantFromLocal,
	instantText,
	isZone,
	isoWithOffset,
	localTimeKind,
	minutesOfTime,
	timeInZone
} from './zones';

const d = plainDateOf;
const hours = (date: string, zone: string) => {
	const { start, end } = dayInZone(d(date), zone);
	return (end.getTime() - start.getTime()) / 3_600_000;
};

describe('zones', () => {
	// Changes of clocks from the IANA time zone database.
	it.each([
		['Europe/Berlin', '2026-03-29', 23],
		['Europe/Berlin', '2026-10-25', 25],
		['Europe/Berlin', '2027-03-28', 23],
		['Europe/Berlin', '2027-10-31', 25],
		['America/New_York', '2026-03-08', 23],
		['America/New_York', '2026-11-01', 25],
		['America/New_York', '2027-03-14', 23],
		['America/New_York', '2027-11-07', 25],
		['Australia/Sydney', '2026-04-05', 25],
		['Australia/Sydney', '2026-10-04', 23]
	])('%s changes its clocks on %s: %i hours', (zone, date, expected) => {
		expect(hours(date, zone)).toBe(expected);
		expect(hours(addDays(d(date), -1), zone)).toBe(24);
		expect(hours(addDays(d(date), 1), zone)).toBe(24);
	});

	it('nine o’clock in Berlin is another hour of UTC from one day to the next', () => {
		expect(instantFromLocal(d('2027-03-27'), '09:00', 'Europe/Berlin').toISOString()).toBe(
			'2027-03-27T08:00:00.000Z'
		);
		expect(instantFromLocal(d('2027-03-28'), '09:00', 'Europe/Berlin').toISOString()).toBe(
			'2027-03-28T07:00:00.000Z'
		);
	});

	it('RFC 5545 §3.3.5: a repeated time means the first, a skipped one is read with the offset before', () => {
		const zone = 'America/New_York';
		expect(isoWithOffset(instantFromLocal(d('2007-11-04'), '01:30', zone), zone)).toBe(
			'2007-11-04T01:30:00-04:00'
		);
		expect(isoWithOffset(instantFromLocal(d('2007-03-11'), '02:30', zone), zone)).toBe(
			'2007-03-11T03:30:00-04:00'
		);
		expect(localTimeKind(d('2007-11-04'), '01:30', zone)).toBe('twice');
		expect(localTimeKind(d('2007-03-11'), '02:30', zone)).toBe('skipped');
		expect(localTimeKind(d('2007-03-11'), '03:30', zone)).toBe('once');
	});

	it('twenty-four hours of elapsed time cross a change of clocks', () => {
		const aware = new Date('2026-03-28T22:30:00+01:00');
		expect(isoWithOffset(addHours(aware, 24), 'Europe/Berlin')).toBe('2026-03-29T23:30:00+02:00');
	});

	it('the day depends on the zone', () => {
		const instant = new Date('2026-06-09T22:30:00Z');
		expect(dateInZone(instant, 'Europe/Berlin')).toBe('2026-06-10');
		expect(dateInZone(instant, 'America/New_York')).toBe('2026-06-09');
		expect(timeInZone(instant, 'Asia/Kathmandu')).toBe('04:15');
	});

	it('shows every instant with its zone', () => {
		const instant = new Date('2026-06-09T07:30:00Z');
		expect(instantText(instant, 'Europe/Berlin')).toBe(
			'Tue 9 June 2026, 09:30 Europe/Berlin (+02:00)'
		);
		expect(instantText(instant, 'America/New_York')).toBe(
			'Tue 9 June 2026, 03:30 America/New York (−04:00)'
		);
		expect(isoWithOffset(new Date('2026-06-09T07:30:01.005Z'), 'UTC')).toBe(
			'2026-06-09T07:30:01.005+00:00'
		);
	});

	it('knows zones by name only', () => {
		for (const zone of [
			'Europe/Berlin',
			'UTC',
			'America/Argentina/Buenos_Aires',
			'Pacific/Chatham'
		])
			expect(isZone(zone), zone).toBe(true);
		for (const zone of ['', '+02:00', 'Mars/Olympus', 'Europe/Berlin\r\n', '../etc', 'Europe/'])
			expect(isZone(zone), zone).toBe(false);
		expect(() => dateInZone(new Date(0), 'Mars/Olympus')).toThrow(RangeError);
	});

	it('reads times of day on a 24-hour clock', () => {
		expect(minutesOfTime('09:30')).toBe(570);
		expect(minutesOfTime('24:00')).toBe(1440);
		for (const text of ['9:30', '24:01', '12:60', '12:3', '', 'noon'])
			expect(minutesOfTime(text)).toBeNull();
	});
});

describe('clock', () => {
	afterEach(() => clock.reset());

	it('stands where it is set and moves when told', () => {
		clock.set('2026-01-15T10:00:00Z');
		expect(clock.now().toISOString()).toBe('2026-01-15T10:00:00.000Z');
		clock.advance(90_000);
		expect(clock.now().toISOString()).toBe('2026-01-15T10:01:30.000Z');
		expect(clock.moved).toBe(true);
		clock.reset();
		expect(clock.moved).toBe(false);
		expect(() => clock.set('yesterday')).toThrow(RangeError);
	});

	it('runs on from a started instant', () => {
		clock.startAt('2020-01-01T00:00:00Z');
		const first = clock.now().getTime();
		expect(first).toBeGreaterThanOrEqual(Date.parse('2020-01-01T00:00:00Z'));
		expect(first).toBeLessThan(Date.parse('2020-01-02T00:00:00Z'));
		clock.advance(86_400_000);
		expect(clock.now().getTime()).toBeGreaterThanOrEqual(first + 86_400_000);
	});
});
