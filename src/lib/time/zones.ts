import { CalendarDate, CalendarDateTime, fromDate, toZoned } from '@internationalized/date';
import { dateText, plainDateOf, type PlainDate } from './dates';

/** Instants and the days and hours they are in a zone. A zone is an IANA name: 'Europe/Berlin'. */

const known = new Map<string, boolean>();

/** Whether the platform knows the zone by this name. Offsets such as '+02:00' are no zones: they know no summer. */
export function isZone(zone: string): boolean {
	let answer = known.get(zone);
	if (answer === undefined) {
		answer = false;
		if (/^[A-Za-z][A-Za-z0-9_+-]*(\/[A-Za-z0-9_+-]+)*$/.test(zone) && zone.length <= 64) {
			try {
				new Intl.DateTimeFormat('en', { timeZone: zone });
				answer = true;
			} catch {
				answer = false;
			}
		}
		if (known.size < 2000) known.set(zone, answer);
	}
	return answer;
}

function checkZone(zone: string): void {
	if (!isZone(zone)) throw new RangeError(`Not a time zone: ${zone}`);
}

const two = (value: number) => String(Math.trunc(value)).padStart(2, '0');

/** The calendar day that `instant` is on in `zone`. */
export function dateInZone(instant: Date, zone: string): PlainDate {
	checkZone(zone);
	const there = fromDate(instant, zone);
	return plainDateOf(
		`${String(there.year).padStart(4, '0')}-${two(there.month)}-${two(there.day)}`
	);
}

/** 'HH:MM' that a clock on the wall shows in `zone` at `instant`. */
export function timeInZone(instant: Date, zone: string): string {
	checkZone(zone);
	const there = fromDate(instant, zone);
	return `${two(there.hour)}:${two(there.minute)}`;
}

/** Minutes after midnight for 'HH:MM' (24-hour clock), or null. '24:00' is allowed as the end of a day. */
export function minutesOfTime(time: string): number | null {
	const match = /^(\d{2}):(\d{2})$/.exec(time);
	if (!match) return null;
	const hours = Number(match[1]);
	const minutes = Number(match[2]);
	if (minutes > 59 || hours > 24 || (hours === 24 && minutes > 0)) return null;
	return hours * 60 + minutes;
}

/**
 * The instant at which clocks in `zone` show `time` ('HH:MM') on `date`.
 * A time that comes twice means the first; a time that is skipped is read with the offset before the gap
 * (so 02:30 becomes 03:30). Source: RFC 5545 §3.3.5.
 */
export function instantFromLocal(date: PlainDate, time: string, zone: string): Date {
	checkZone(zone);
	const minutes = minutesOfTime(time);
	if (minutes === null || minutes === 1440) throw new RangeError(`Not a time of day: ${time}`);
	const [year, month, day] = date.split('-').map(Number) as [number, number, number];
	const local = new CalendarDateTime(year, month, day, Math.floor(minutes / 60), minutes % 60);
	return toZoned(local, zone, 'compatible').toDate();
}

/** Whether clocks in `zone` never show, or show twice, this time on this day. */
export function localTimeKind(
	date: PlainDate,
	time: string,
	zone: string
): 'once' | 'skipped' | 'twice' {
	checkZone(zone);
	const minutes = minutesOfTime(time);
	if (minutes === null || minutes === 1440) throw new RangeError(`Not a time of day: ${time}`);
	const [year, month, day] = date.split('-').map(Number) as [number, number, number];
	const local = new CalendarDateTime(year, month, day, Math.floor(minutes / 60), minutes % 60);
	const first = toZoned(local, zone, 'earlier').toDate();
	const last = toZoned(local, zone, 'later').toDate();
	if (first.getTime() === last.getTime()) return 'once';
	return timeInZone(first, zone) === time ? 'twice' : 'skipped';
}

/** Instants at which a day begins and ends in a zone; 23, 24 or 25 hours apart. */
export function dayInZone(date: PlainDate, zone: string): { start: Date; end: Date } {
	checkZone(zone);
	const [year, month, day] = date.split('-').map(Number) as [number, number, number];
	const there = new CalendarDate(year, month, day);
	return { start: there.toDate(zone), end: there.add({ days: 1 }).toDate(zone) };
}

/** '+02:00', the offset from UTC in `zone` at `instant`. */
export function offsetText(instant: Date, zone: string): string {
	checkZone(zone);
	const minutes = Math.trunc(fromDate(instant, zone).offset / 60_000);
	const size = Math.abs(minutes);
	return `${minutes < 0 ? '-' : '+'}${two(size / 60)}:${two(size % 60)}`;
}

/** '2026-06-09T09:30:00+02:00'; milliseconds only when there are some. */
export function isoWithOffset(instant: Date, zone: string): string {
	const there = fromDate(instant, zone);
	const fraction = there.millisecond ? `.${String(there.millisecond).padStart(3, '0')}` : '';
	return `${dateInZone(instant, zone)}T${two(there.hour)}:${two(there.minute)}:${two(there.second)}${fraction}${offsetText(instant, zone)}`;
}

/** 'Tue 9 June 2026, 09:30 Europe/Berlin (+02:00)': no shown time is without its zone. */
export function instantText(instant: Date, zone: string): string {
	return `${dateText(dateInZone(instant, zone))}, ${timeInZone(instant, zone)} ${zoneText(instant, zone)}`;
}

/** 'Europe/Berlin (+02:00)' */
export function zoneText(instant: Date, zone: string): string {
	if (zone === 'UTC') return zone;
	return `${zone.replaceAll('_', ' ')} (${offsetText(instant, zone).replace('-', '−')})`;
}

/** `hours` later by elapsed time, whatever clocks on the wall do meanwhile. */
export function addHours(instant: Date, hours: number): Date {
	return new Date(instant.getTime() + hours * 3_600_000);
}
