import { addDays, dateText, isoWeekday, type PlainDate } from '../../time/dates';
import { dateInZone, instantFromLocal, minutesOfTime } from '../../time/zones';
import { problem, type Problem } from '../problems';
import type { OpeningHours } from '../study/definition';

/** From start (included) to end (not included). */
export type TimeSpan = { start: Date; end: Date };

/** Days on which a site sees nobody, first and last included. */
export type Closure = { from: PlainDate; to: PlainDate; reason: string };

export function spanOf(start: Date, minutes: number): TimeSpan {
	return { start, end: new Date(start.getTime() + minutes * 60_000) };
}

/** Two spans that only touch do not overlap. */
export function overlap(a: TimeSpan, b: TimeSpan): boolean {
	return a.start < b.end && b.start < a.end;
}

/** When a site is open on a day, as instants, earliest first. A day of a change of clocks may be longer or shorter. */
export function openSpans(
	hours: readonly OpeningHours[],
	zone: string,
	date: PlainDate,
	closures: readonly Closure[] = []
): TimeSpan[] {
	if (closures.some((closure) => date >= closure.from && date <= closure.to)) return [];
	const weekday = isoWeekday(date);
	return hours
		.filter((each) => each.weekday === weekday)
		.map((each) => ({
			start: instantFromLocal(date, each.opens, zone),
			end:
				minutesOfTime(each.closes) === 1440
					? instantFromLocal(addDays(date, 1), '00:00', zone)
					: instantFromLocal(date, each.closes, zone)
		}))
		.filter((span) => span.start < span.end)
		.sort((a, b) => a.start.getTime() - b.start.getTime());
}

/** Why the site cannot see anyone during the whole span, or null. Openings that touch count as one. */
export function checkOpening(
	span: TimeSpan,
	hours: readonly OpeningHours[],
	zone: string,
	closures: readonly Closure[] = []
): Problem<'OUTSIDE_OPENING_HOURS' | 'SITE_CLOSED'> | null {
	const date = dateInZone(span.start, zone);
	if (closures.some((closure) => date >= closure.from && date <= closure.to))
		return problem('SITE_CLOSED', { date: dateText(date) });
	let reached = span.start;
	// A span may run past midnight where one day's opening ends as the next begins.
	for (const open of [
		...openSpans(hours, zone, date, closures),
		...openSpans(hours, zone, addDays(date, 1), closures)
	])
		if (open.start <= reached && open.end > reached) reached = open.end;
	if (reached >= span.end) return null;
	return problem('OUTSIDE_OPENING_HOURS', { hours: openingText(hours, isoWeekday(date)) });
}

const dayNames = ['Monday', 'Tuesday', 'Wednesday', 'Thursday', 'Friday', 'Saturday', 'Sunday'];

/** 'Monday 08:00 to 12:00 and 13:00 to 17:00', or 'closed on Sunday' */
export function openingText(hours: readonly OpeningHours[], weekday: number): string {
	const name = dayNames[weekday - 1] ?? '';
	const spans = hours
		.filter((each) => each.weekday === weekday)
		.sort((a, b) => a.opens.localeCompare(b.opens))
		.map((each) => `${each.opens} to ${each.closes}`);
	return spans.length === 0 ? `closed on ${name}` : `${name} ${spans.join(' and ')}`;
}

export type Booked = TimeSpan & { id: string; room: string | null; person: string | null };

/** The first booking that holds the same room or person at an overlapping time. The database refuses it as well. */
export function findClash(
	wanted: TimeSpan & { id?: string; room: string | null; person: string | null },
	others: readonly Booked[]
): { with: Booked; what: 'room' | 'person' } | null {
	for (const other of others) {
		if (other.id === wanted.id || !overlap(wanted, other)) continue;
		if (wanted.room !== null && wanted.room === other.room) return { with: other, what: 'room' };
		if (wanted.person !== null && wanted.person === other.person)
			return { with: other, what: 'person' };
	}
	return null;
}
