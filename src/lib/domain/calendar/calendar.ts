import { createEvents, type EventAttributes, type HeaderAttributes } from 'ics';
import { isId, type Id } from '../../id';
import { bad, good, problem, type Problem, type Result } from '../problems';
import { fold } from './fold';

/**
 * Calendar files (RFC 5545, 5546). Nothing in them tells of a study, a condition or a person's code: the title is
 * the same neutral one for everybody. Times are instants in UTC, which every calendar shows in its own zone, so no
 * file depends on a definition of a zone's summer time.
 */
export const neutralTitle = 'Study visit';
const productId = '-//Heddle//Visits//EN';

/** The library takes the stamp of a message but leaves it out of its types. */
type Written = EventAttributes & { timestamp: number };

export type Method = 'REQUEST' | 'CANCEL';

export type Invitation = {
	/** A random UUID that stays with the appointment through every change; see `newRandomId`. */
	uid: Id;
	/** 0 for the first message, one more for each that follows, the cancellation included. */
	sequence: number;
	method: Method;
	start: Date;
	end: Date;
	/** When this message was made. */
	now: Date;
	place: string;
	/** May hold several lines. */
	notes?: string;
	organiser: { name: string; email: string };
	attendee: { email: string };
	/** A reminder this long before the start. */
	alarmMinutesBefore?: number;
};

export type CalendarProblem = Problem<
	'CALENDAR_TEXT' | 'CALENDAR_TIMES' | 'CALENDAR_UID' | 'CALENDAR_ADDRESS'
>;

export type CalendarFile = {
	text: string;
	/** Null in a plain file or feed, which has no METHOD. */
	method: Method | null;
};

/** Controls and the line separators that some programs take for the end of a line. */
const forbidden = /[\p{Cc}\u2028\u2029]/u;
const address =
	/^[^\s@<>()[\]\\,;:"\p{Cc}]{1,64}@[A-Za-z0-9](?:[A-Za-z0-9.-]{0,250}[A-Za-z0-9])?$/u;

function checkLine(field: string, text: string): CalendarProblem | null {
	return forbidden.test(text) || !text.isWellFormed() ? problem('CALENDAR_TEXT', { field }) : null;
}

/** Several lines with one kind of line break, or what is wrong with them. */
function readNotes(text: string): Result<string, CalendarProblem> {
	const lines = text.replace(/\r\n|\r|\n|\u2028|\u2029/g, '\n');
	const wrong = checkLine('notes', lines.replaceAll('\n', ''));
	return wrong ? bad(wrong) : good(lines);
}

function checkEvent(event: {
	uid: Id;
	sequence: number;
	start: Date;
	end: Date;
}): CalendarProblem | null {
	if (!isId(event.uid)) return problem('CALENDAR_UID');
	if (!Number.isSafeInteger(event.sequence) || event.sequence < 0 || event.sequence > 2 ** 31 - 1)
		throw new RangeError(`Not a sequence number: ${event.sequence}`);
	// Written so that an invalid date is refused too.
	return event.end.getTime() > event.start.getTime() ? null : problem('CALENDAR_TIMES');
}

const checkAddress = (email: string): CalendarProblem | null =>
	address.test(email) ? null : problem('CALENDAR_ADDRESS', { text: email.slice(0, 80) });

function made(events: Written[], header: HeaderAttributes): string {
	const { error, value } = createEvents(events, header);
	if (error || value === undefined || value === null)
		throw new Error('The calendar file could not be made', { cause: error });
	return fold(value);
}

const inUtc = {
	startInputType: 'utc',
	startOutputType: 'utc',
	endInputType: 'utc',
	endOutputType: 'utc'
} as const;

/** The file for an invitation, its update (higher sequence), or its cancellation. */
export function invitation(given: Invitation): Result<CalendarFile, CalendarProblem> {
	const notes = readNotes(given.notes ?? '');
	if (!notes.ok) return notes;
	const wrong =
		checkEvent(given) ??
		checkLine('place', given.place) ??
		checkLine('organiser', given.organiser.name) ??
		checkAddress(given.organiser.email) ??
		checkAddress(given.attendee.email);
	if (wrong) return bad(wrong);

	const event: Written = {
		...inUtc,
		uid: given.uid,
		sequence: given.sequence,
		timestamp: given.now.getTime(),
		title: neutralTitle,
		start: given.start.getTime(),
		end: given.end.getTime(),
		status: given.method === 'CANCEL' ? 'CANCELLED' : 'CONFIRMED',
		// A quotation mark cannot be written inside a parameter (RFC 5545 §3.2).
		organizer: { name: given.organiser.name.replaceAll('"', '’'), email: given.organiser.email },
		// The address stands for the name: nobody is named in a file that may be read on a lock screen.
		attendees: [
			{
				name: given.attendee.email,
				email: given.attendee.email,
				rsvp: given.method === 'REQUEST',
				role: 'REQ-PARTICIPANT',
				partstat: 'NEEDS-ACTION'
			}
		]
	};
	if (given.place.trim() !== '') event.location = given.place;
	if (notes.value.trim() !== '') event.description = notes.value;
	if (given.method === 'REQUEST' && given.alarmMinutesBefore)
		event.alarms = [
			{
				action: 'display',
				description: neutralTitle,
				trigger: { minutes: given.alarmMinutesBefore, before: true }
			}
		];
	return good({ text: made([event], { productId, method: given.method }), method: given.method });
}

export type FeedEvent = {
	uid: Id;
	sequence: number;
	start: Date;
	end: Date;
	place?: string;
	cancelled?: boolean;
	/** When the appointment was last changed. */
	changed: Date;
};

/** A file that a calendar program fetches again and again: no METHOD, neutral words only. */
export function feed(
	events: readonly FeedEvent[],
	given: { now: Date; name?: string }
): Result<CalendarFile, CalendarProblem> {
	const name = given.name ?? 'Visits';
	const wrongName = checkLine('name', name);
	if (wrongName) return bad(wrongName);
	const written: Written[] = [];
	for (const each of events) {
		const wrong = checkEvent(each) ?? checkLine('place', each.place ?? '');
		if (wrong) return bad(wrong);
		const event: Written = {
			...inUtc,
			uid: each.uid,
			sequence: each.sequence,
			timestamp: given.now.getTime(),
			title: neutralTitle,
			start: each.start.getTime(),
			end: each.end.getTime(),
			status: each.cancelled ? 'CANCELLED' : 'CONFIRMED',
			lastModified: each.changed.getTime()
		};
		if (each.place?.trim()) event.location = each.place;
		written.push(event);
	}
	// The library writes METHOD:PUBLISH unless told that there is none.
	return good({
		text: made(written, { productId, calName: name, method: undefined }),
		method: null
	});
}

/** The media type to serve or send the file with; its parameter is the METHOD of the file (RFC 6047 §2.4). */
export function contentType(file: Pick<CalendarFile, 'method'>): string {
	return `text/calendar; charset=utf-8${file.method ? `; method=${file.method}` : ''}`;
}

/** What a mail carries: the same METHOD in the file and in the part's type. */
export function mailPart(
	file: CalendarFile
): { method: Method; filename: string; content: string } | null {
	return file.method === null
		? null
		: { method: file.method, filename: 'visit.ics', content: file.text };
}
