import { describe, expect, it } from 'vitest';
import { plainDateOf } from '../../time/dates';
import { checkOpening, findClash, openSpans, openingText, overlap, spanOf } from './booking';

const d = plainDateOf;
const weekdays = [1, 2, 3, 4, 5].flatMap((weekday) => [
	{ weekday, opens: '08:00', closes: '12:00' },
	{ weekday, opens: '13:00', closes: '17:00' }
]);
const at = (text: string, minutes: number) => spanOf(new Date(text), minutes);

describe('opening hours', () => {
	// Tuesday 9 June 2026 in Berlin is +02:00.
	it.each<[string, number, string | null]>([
		['2026-06-09T08:00:00+02:00', 60, null],
		['2026-06-09T11:00:00+02:00', 60, null],
		['2026-06-09T11:30:00+02:00', 60, 'OUTSIDE_OPENING_HOURS'],
		['2026-06-09T07:59:00+02:00', 30, 'OUTSIDE_OPENING_HOURS'],
		['2026-06-09T16:30:00+02:00', 31, 'OUTSIDE_OPENING_HOURS'],
		['2026-06-13T09:00:00+02:00', 30, 'OUTSIDE_OPENING_HOURS'],
		['2026-06-09T08:00:00Z', 60, null],
		['2026-06-09T10:00:00Z', 30, 'OUTSIDE_OPENING_HOURS']
	])('a visit at %s for %i minutes', (start, minutes, code) => {
		expect(checkOpening(at(start, minutes), weekdays, 'Europe/Berlin')?.code ?? null).toBe(code);
	});

	it('says when the site is open', () => {
		expect(openingText(weekdays, 2)).toBe('Tuesday 08:00 to 12:00 and 13:00 to 17:00');
		expect(openingText(weekdays, 7)).toBe('closed on Sunday');
	});

	it('closures win', () => {
		const closures = [{ from: d('2026-06-08'), to: d('2026-06-09'), reason: 'Fair' }];
		expect(
			checkOpening(at('2026-06-09T09:00:00+02:00', 30), weekdays, 'Europe/Berlin', closures)?.code
		).toBe('SITE_CLOSED');
		expect(openSpans(weekdays, 'Europe/Berlin', d('2026-06-09'), closures)).toEqual([]);
	});

	it('openings that touch are one, also across midnight', () => {
		const always = [1, 2, 3, 4, 5, 6, 7].flatMap((weekday) => [
			{ weekday, opens: '00:00', closes: '12:00' },
			{ weekday, opens: '12:00', closes: '24:00' }
		]);
		expect(checkOpening(at('2026-06-09T11:30:00Z', 60), always, 'UTC')).toBeNull();
		expect(checkOpening(at('2026-06-09T23:30:00Z', 60), always, 'UTC')).toBeNull();
	});

	it('the same hours are other instants after a change of clocks', () => {
		const sunday = [{ weekday: 7, opens: '01:00', closes: '05:00' }];
		const [before] = openSpans(sunday, 'Europe/Berlin', d('2026-03-22'));
		const [change] = openSpans(sunday, 'Europe/Berlin', d('2026-03-29'));
		expect(before?.start.toISOString()).toBe('2026-03-22T00:00:00.000Z');
		expect(change?.end.toISOString()).toBe('2026-03-29T03:00:00.000Z');
		expect((change!.end.getTime() - change!.start.getTime()) / 3_600_000).toBe(3);
	});
});

describe('clashes', () => {
	const span = at('2026-06-09T09:00:00Z', 30);
	const taken = [{ ...span, id: 'first', room: 'room-1', person: 'nurse' }];

	it('spans that touch do not overlap', () => {
		expect(overlap(span, at('2026-06-09T09:30:00Z', 30))).toBe(false);
		expect(overlap(at('2026-06-09T09:30:00Z', 30), span)).toBe(false);
		expect(overlap(span, at('2026-06-09T09:29:00Z', 30))).toBe(true);
		expect(overlap(span, at('2026-06-09T08:00:00Z', 300))).toBe(true);
	});

	it('finds the room or the person that is taken, and not the booking itself', () => {
		const wanted = at('2026-06-09T09:15:00Z', 30);
		expect(findClash({ ...wanted, room: 'room-1', person: null }, taken)?.what).toBe('room');
		expect(findClash({ ...wanted, room: 'room-2', person: 'nurse' }, taken)?.what).toBe('person');
		expect(findClash({ ...wanted, room: 'room-2', person: 'other' }, taken)).toBeNull();
		expect(findClash({ ...wanted, id: 'first', room: 'room-1', person: null }, taken)).toBeNull();
		expect(
			findClash({ ...wanted, room: null, person: null }, [
				{ ...span, id: 'x', room: null, person: null }
			])
		).toBeNull();
	});
});
