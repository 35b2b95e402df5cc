import { describe, expect, test } from 'vitest';
import { plainDateOf } from '$lib/time/dates';
import { freeTimes } from './free-times';

const zone = 'Europe/Berlin';
const tuesday = plainDateOf('2026-06-09');
const opening = [
	{ weekday: 2, opens: '08:00', closes: '09:00' },
	{ weekday: 2, opens: '13:15', closes: '14:00' }
];
const past = new Date('2026-06-01T00:00:00Z');
const times = (given: Partial<Parameters<typeof freeTimes>[0]> = {}) =>
	freeTimes({
		opening,
		closures: [],
		zone,
		date: tuesday,
		minutes: 30,
		taken: [],
		now: past,
		...given
	}).map((each) => each.time);

describe('free times', () => {
	test('fill each opening in quarters of an hour, as far as the visit still fits', () => {
		expect(times()).toEqual(['08:00', '08:15', '08:30', '13:15', '13:30']);
	});

	test('leave out what overlaps a booking, but not what only touches it', () => {
		const taken = [
			{ start: new Date('2026-06-09T06:30:00Z'), end: new Date('2026-06-09T07:00:00Z') }
		];
		expect(times({ taken })).toEqual(['08:00', '13:15', '13:30']);
	});

	test('leave out what has begun already', () => {
		expect(times({ now: new Date('2026-06-09T06:20:00Z') })).toEqual(['08:30', '13:15', '13:30']);
	});

	test('there are none on a day the site is closed', () => {
		expect(times({ date: plainDateOf('2026-06-10') })).toEqual([]);
	});

	test('an hour that comes twice is offered once, by its first coming', () => {
		// Clocks in Berlin go back from 03:00 to 02:00 on 25 October 2026 (tz database).
		const night = [{ weekday: 7, opens: '02:00', closes: '03:00' }];
		const found = freeTimes({
			opening: night,
			closures: [],
			zone,
			date: plainDateOf('2026-10-25'),
			minutes: 15,
			taken: [],
			now: past
		});
		expect(found.map((each) => each.time)).toEqual(['02:00', '02:15', '02:30', '02:45']);
		expect(found[0]?.start.toISOString()).toBe('2026-10-25T00:00:00.000Z');
	});
});
