import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { addDays, addMonths, plainDateOf } from '../../time/dates';
import type { PlannedVisit } from '../study/definition';
import {
	inWindow,
	placementOf,
	planVisits,
	shareGone,
	timeLeft,
	windowOf,
	windowText
} from './window';

const d = plainDateOf;

const visit = (
	target: PlannedVisit['target'],
	before: PlannedVisit['before'],
	after: PlannedVisit['after'],
	anchor = 'enrolment'
) => ({ anchor, target, before, after });

const days = (amount: number) => ({ amount, unit: 'day' as const });
const months = (amount: number) => ({ amount, unit: 'month' as const });

describe('windows', () => {
	// Computed by hand from the Gregorian calendar.
	it.each([
		[28, '2026-02-09', '2026-02-12', '2026-02-19'],
		[84, '2026-04-06', '2026-04-09', '2026-04-16'],
		[182, '2026-07-13', '2026-07-16', '2026-07-23'],
		[364, '2027-01-11', '2027-01-14', '2027-01-21']
	])('day %i from 2026-01-15, −3 to +7', (day, earliest, target, latest) => {
		expect(windowOf(visit(days(day), days(3), days(7)), { enrolment: d('2026-01-15') })).toEqual({
			earliest,
			target,
			latest
		});
	});

	it('crosses a leap day', () => {
		const anchors = { enrolment: d('2028-02-01') };
		expect(windowOf(visit(days(28), days(0), days(1)), anchors)).toEqual({
			earliest: '2028-02-29',
			target: '2028-02-29',
			latest: '2028-03-01'
		});
	});

	it('weeks are seven days, and a target may lie before its anchor', () => {
		expect(
			windowOf(visit({ amount: -2, unit: 'week' }, { amount: 1, unit: 'week' }, days(0)), {
				enrolment: d('2026-03-01')
			})
		).toEqual({ earliest: '2026-02-08', target: '2026-02-15', latest: '2026-02-15' });
	});

	it('months step from the anchor, so month ends do not drift', () => {
		const window = windowOf(visit(months(3), months(1), months(1)), { enrolment: d('2026-11-30') });
		expect(window).toEqual({ earliest: '2027-01-30', target: '2027-02-28', latest: '2027-03-30' });
	});

	it('is unknown while the anchor is', () => {
		expect(windowOf(visit(days(1), days(0), days(0), 'randomisation'), {})).toBeNull();
		expect(
			windowOf(visit(days(7), days(1), days(1), 'visit:baseline'), {
				visits: { baseline: d('2026-01-15') }
			})?.target
		).toBe('2026-01-22');
	});

	it('always holds its target, whatever the anchor', () => {
		fc.assert(
			fc.property(
				fc.integer({ min: 0, max: 20_000 }),
				fc.integer({ min: 0, max: 60 }),
				fc.constantFrom('day' as const, 'week' as const, 'month' as const),
				fc.integer({ min: 0, max: 30 }),
				fc.integer({ min: 0, max: 30 }),
				(start, amount, unit, before, after) => {
					const window = windowOf(visit({ amount, unit }, days(before), days(after)), {
						enrolment: addDays(d('2000-01-01'), start)
					});
					if (!window) throw new Error('no window');
					expect(inWindow(window, window.target)).toBe(true);
					expect(placementOf(window, addDays(window.earliest, -1))).toEqual({
						place: 'early',
						days: 1
					});
					expect(placementOf(window, addDays(window.latest, 1))).toEqual({
						place: 'late',
						days: 1
					});
				}
			)
		);
	});
});

describe('time left', () => {
	const window = { earliest: d('2026-06-01'), target: d('2026-06-08'), latest: d('2026-06-15') };

	it.each([
		['2026-05-30', 'to-come', 2, 'opens in 2 days'],
		['2026-05-31', 'to-come', 1, 'opens in 1 day'],
		['2026-06-01', 'open', 14, '14 days left'],
		['2026-06-11', 'open', 4, '4 days left'],
		['2026-06-12', 'closing', 3, 'closes in 3 days'],
		['2026-06-14', 'closing', 1, 'closes in 1 day'],
		['2026-06-15', 'closing', 0, 'closes today'],
		['2026-06-16', 'passed', 1, 'passed 1 day ago'],
		['2026-06-30', 'passed', 15, 'passed 15 days ago']
	])('on %s: %s', (today, state, left, text) => {
		expect(timeLeft(window, d(today))).toEqual({ state, days: left, text });
	});

	it('closes as early as it is told to', () => {
		expect(timeLeft(window, d('2026-06-08'), 7).state).toBe('closing');
		expect(timeLeft(window, d('2026-06-08'), 6).state).toBe('open');
	});

	it('knows the share gone by, inside and outside', () => {
		expect(shareGone(window, d('2026-06-08'))).toBeCloseTo(0.5, 10);
		expect(shareGone(window, d('2026-05-31'))).toBeLessThan(0);
		expect(shareGone(window, d('2026-06-16'))).toBeGreaterThan(1);
	});

	it('is said in words', () => {
		expect(windowText(window)).toBe('1 Jun 2026 to 15 Jun 2026');
	});
});

describe('planning all visits', () => {
	const make = (
		key: string,
		order: number,
		anchor: string,
		target: PlannedVisit['target']
	): PlannedVisit => ({
		key,
		name: key,
		anchor,
		target,
		before: days(2),
		after: days(2),
		order,
		lengthMinutes: 30
	});
	const visits = [
		make('month-1', 3, 'visit:dose', months(1)),
		make('baseline', 1, 'enrolment', days(0)),
		make('dose', 2, 'randomisation', days(7))
	];

	it('keeps the order and leaves out what is not known', () => {
		const planned = planVisits({ visits }, { enrolment: d('2026-01-31') });
		expect(planned.map((each) => each.visit.key)).toEqual(['baseline', 'dose', 'month-1']);
		expect(planned.map((each) => each.window?.target ?? null)).toEqual(['2026-01-31', null, null]);
	});

	it('a visit counted from one to come is provisional and moves when that one takes place', () => {
		const anchors = { enrolment: d('2026-01-20'), randomisation: d('2026-01-24') };
		const before = planVisits({ visits }, anchors)[2];
		expect(before).toMatchObject({ provisional: true, window: { target: '2026-02-28' } });
		const after = planVisits({ visits }, { ...anchors, visits: { dose: d('2026-02-02') } })[2];
		expect(after).toMatchObject({
			provisional: false,
			window: { target: addMonths(d('2026-02-02'), 1) }
		});
	});

	it('ends on a cycle', () => {
		const cycle = [make('a', 1, 'visit:b', days(1)), make('b', 2, 'visit:a', days(1))];
		expect(planVisits({ visits: cycle }, {}).map((each) => each.window)).toEqual([null, null]);
	});
});
