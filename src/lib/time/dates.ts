import { GregorianCalendar, parseDate, type CalendarDate } from '@internationalized/date';

/**
 * Calendar days without a zone, as text 'YYYY-MM-DD'. They compare with < and > as text.
 * Zones play a part only in `zones.ts`, where an instant is turned into a day or the other way round.
 */
declare const plainDate: unique symbol;
export type PlainDate = string & { readonly [plainDate]: true };

/** What is known of a date: a year, a month of a year, or a day. Never filled in. */
declare const partialDate: unique symbol;
export type PartialDate = string & { readonly [partialDate]: true };

const calendar = new GregorianCalendar();
const shape = /^(\d{4})-(\d{2})-(\d{2})$/;

function daysInMonth(year: number, month: number): number {
	return new Date(Date.UTC(2000 + (year % 400), month, 0)).getUTCDate();
}

function exists(year: number, month: number, day: number): boolean {
	return year >= 1 && month >= 1 && month <= 12 && day >= 1 && day <= daysInMonth(year, month);
}

/** The date, or null when the text is not 'YYYY-MM-DD' or no such day exists (2026-02-30). */
export function findPlainDate(text: string): PlainDate | null {
	const match = shape.exec(text);
	if (!match) return null;
	return exists(Number(match[1]), Number(match[2]), Number(match[3])) ? (text as PlainDate) : null;
}

/** The date; throws a RangeError when there is no such day. */
export function plainDateOf(text: string): PlainDate {
	const date = findPlainDate(text);
	if (date === null) throw new RangeError(`Not a date: ${text}`);
	return date;
}

export function isPlainDate(text: unknown): text is PlainDate {
	return typeof text === 'string' && findPlainDate(text) !== null;
}

/** 'YYYY', 'YYYY-MM' or 'YYYY-MM-DD' as given, or null. */
export function findPartialDate(text: string): PartialDate | null {
	if (/^\d{4}$/.test(text)) return Number(text) >= 1 ? (text as PartialDate) : null;
	if (/^\d{4}-\d{2}$/.test(text)) return findPlainDate(`${text}-01`) ? (text as PartialDate) : null;
	return findPlainDate(text) as PartialDate | null;
}

const read = (date: PlainDate): CalendarDate => parseDate(date);
const write = (date: CalendarDate): PlainDate => {
	if (date.era !== 'AD' || date.year > 9999)
		throw new RangeError('The date leaves years 1 to 9999');
	return date.toString() as PlainDate;
};

function whole(amount: number, what: string): void {
	if (!Number.isSafeInteger(amount)) throw new RangeError(`${what} must be whole: ${amount}`);
}

/** The day `days` later; earlier when negative. */
export function addDays(date: PlainDate, days: number): PlainDate {
	whole(days, 'Days');
	return write(read(date).add({ days }));
}

/**
 * The same day of the month, `months` later, or that month's last day when it has no such day.
 * Count from the anchor each time: 31 Jan + 2 months is 31 Mar, but 31 Jan + 1 month + 1 month is 28 Mar.
 */
export function addMonths(date: PlainDate, months: number): PlainDate {
	whole(months, 'Months');
	return write(read(date).add({ months }));
}

/** Whole days from `from` to `to`; negative when `to` is earlier; zones play no part. */
export function daysBetween(from: PlainDate, to: PlainDate): number {
	return calendar.toJulianDay(read(to)) - calendar.toJulianDay(read(from));
}

/**
 * Day number relative to a reference day, which is day 1; the day before it is day −1, and there is no day 0.
 * Source: SDTM study day rule, --DY (standards list §3, rule from memory).
 */
export function studyDay(date: PlainDate, reference: PlainDate): number {
	const days = daysBetween(reference, date);
	return days >= 0 ? days + 1 : days;
}

/** When someone born on 29 February has a birthday in a common year: it is for the protocol or the law to say. */
export type LeapBirthday = '28 February' | '1 March';

/** Completed years on `on`; negative when not yet born. */
export function ageInYears(
	born: PlainDate,
	on: PlainDate,
	leapBirthday: LeapBirthday = '1 March'
): number {
	const years = Number(on.slice(0, 4)) - Number(born.slice(0, 4));
	let birthday = born.slice(5);
	if (birthday === '02-29' && daysInMonth(Number(on.slice(0, 4)), 2) === 28)
		birthday = leapBirthday === '1 March' ? '03-01' : '02-28';
	return on.slice(5) >= birthday ? years : years - 1;
}

/** Monday is 1, Sunday is 7. */
export function isoWeekday(date: PlainDate): number {
	// Julian day 0 was a Monday.
	return (calendar.toJulianDay(read(date)) % 7) + 1;
}

export type IsoWeek = { year: number; week: number; weekday: number };

/** Week by ISO 8601: weeks start on Monday, and week 1 holds the year's first Thursday. */
export function isoWeek(date: PlainDate): IsoWeek {
	const weekday = isoWeekday(date);
	const thursday = addDays(date, 4 - weekday);
	const year = Number(thursday.slice(0, 4));
	const week =
		Math.floor(daysBetween(`${thursday.slice(0, 4)}-01-01` as PlainDate, thursday) / 7) + 1;
	return { year, week, weekday };
}

/** '2026-W53-4' */
export function isoWeekText(date: PlainDate): string {
	const { year, week, weekday } = isoWeek(date);
	return `${String(year).padStart(4, '0')}-W${String(week).padStart(2, '0')}-${weekday}`;
}

/** The Monday of the week that holds `date`. */
export function mondayOf(date: PlainDate): PlainDate {
	return addDays(date, 1 - isoWeekday(date));
}

const weekdays = ['Mon', 'Tue', 'Wed', 'Thu', 'Fri', 'Sat', 'Sun'];
const months = [
	'January',
	'February',
	'March',
	'April',
	'May',
	'June',
	'July',
	'August',
	'September',
	'October',
	'November',
	'December'
];

/** 'Tue 9 June 2026' */
export function dateText(date: PlainDate): string {
	const [year, month, day] = date.split('-').map(Number) as [number, number, number];
	return `${weekdays[isoWeekday(date) - 1]} ${day} ${months[month - 1]} ${year}`;
}

/** '9 Jun 2026', for tables. */
export function shortDateText(date: PlainDate): string {
	const [year, month, day] = date.split('-').map(Number) as [number, number, number];
	return `${day} ${months[month - 1]?.slice(0, 3)} ${year}`;
}
