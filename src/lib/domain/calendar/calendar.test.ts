import { spawnSync } from 'node:child_process';
import ICAL from 'ical.js';
import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { instantFromLocal } from '../../time/zones';
import { plainDateOf } from '../../time/dates';
import { newRandomId } from '../../id';
import {
	contentType,
	feed,
	invitation,
	mailPart,
	type FeedEvent,
	type Invitation
} from './calendar';
import { fold } from './fold';

const now = new Date('2026-06-01T12:00:00Z');
const uid = '6f1d2c3b-4a59-4e87-9b1a-0c2d3e4f5a6b';

const given = (change: Partial<Invitation> = {}): Invitation => ({
	uid,
	sequence: 0,
	method: 'REQUEST',
	start: new Date('2026-06-09T07:30:00Z'),
	end: new Date('2026-06-09T08:00:00Z'),
	now,
	place: 'Room 1, First site',
	organiser: { name: 'Visit desk', email: 'desk@example.org' },
	attendee: { email: 'person@example.org' },
	...change
});

function fileOf(change: Partial<Invitation> = {}): string {
	const made = invitation(given(change));
	if (!made.ok) throw new Error(made.problem.message);
	return made.value.text;
}

type Read = {
	method: string | null;
	version: string;
	events: {
		uid: string;
		sequence: number;
		status: string;
		start: string;
		end: string;
		stamp: string;
		summary: string;
		location: string | null;
		description: string | null;
		attendees: string[];
		alarms: string[];
	}[];
};

/** Parser 1: ical.js. */
function readWithIcalJs(text: string): Read {
	const calendar = new ICAL.Component(ICAL.parse(text) as unknown[] as never);
	const one = (component: InstanceType<typeof ICAL.Component>, name: string) => {
		const value = component.getFirstPropertyValue(name);
		return value === null ? null : String(value);
	};
	const instant = (component: InstanceType<typeof ICAL.Component>, name: string) => {
		const value = component.getFirstPropertyValue(name) as InstanceType<typeof ICAL.Time>;
		if (value.zone !== ICAL.Timezone.utcTimezone) throw new Error(`${name} is not in UTC`);
		return value.toJSDate().toISOString();
	};
	return {
		method: one(calendar, 'method'),
		version: one(calendar, 'version') ?? '',
		events: calendar.getAllSubcomponents('vevent').map((event) => ({
			uid: one(event, 'uid') ?? '',
			sequence: Number(one(event, 'sequence')),
			status: one(event, 'status') ?? '',
			start: instant(event, 'dtstart'),
			end: instant(event, 'dtend'),
			stamp: instant(event, 'dtstamp'),
			summary: one(event, 'summary') ?? '',
			location: one(event, 'location'),
			description: one(event, 'description'),
			attendees: event.getAllProperties('attendee').map((each) => String(each.getFirstValue())),
			alarms: event.getAllSubcomponents('valarm').map((each) => one(each, 'trigger') ?? '')
		}))
	};
}

const python = `
import sys, json
from icalendar import Calendar
def text(value):
    return None if value is None else str(value)
def instant(value):
    assert value.dt.tzinfo is not None and value.dt.utcoffset().total_seconds() == 0
    return value.dt.strftime('%Y-%m-%dT%H:%M:%S.000Z')
def listed(value):
    return [] if value is None else [str(v) for v in value] if isinstance(value, list) else [str(value)]
calendar = Calendar.from_ical(sys.stdin.buffer.read())
print(json.dumps({
    'method': text(calendar.get('METHOD')),
    'version': str(calendar.get('VERSION')),
    'events': [{
        'uid': str(e['UID']), 'sequence': int(e['SEQUENCE']), 'status': str(e['STATUS']),
        'start': instant(e['DTSTART']), 'end': instant(e['DTEND']), 'stamp': instant(e['DTSTAMP']),
        'summary': str(e['SUMMARY']), 'location': text(e.get('LOCATION')),
        'description': text(e.get('DESCRIPTION')), 'attendees': listed(e.get('ATTENDEE')),
        'alarms': [a['TRIGGER'].to_ical().decode() for a in e.walk('VALARM')],
    } for e in calendar.walk('VEVENT')],
}))
`;

/** Parser 2: the icalendar package of Python (Debian: python3-icalendar). */
function readWithPython(text: string): Read {
	const run = spawnSync('/usr/bin/python3', ['-c', python], { input: text, encoding: 'utf8' });
	if (run.status !== 0) throw new Error(`python3-icalendar: ${run.error ?? run.stderr}`);
	return JSON.parse(run.stdout) as Read;
}

const octets = (text: string) => new TextEncoder().encode(text).length;
const parsers = [
	['ical.js', readWithIcalJs],
	['python3-icalendar', readWithPython]
] as const;

describe.each(parsers)('as %s reads it', (_, read) => {
	it('a request', () => {
		expect(
			read(fileOf({ notes: 'Please bring your card.\nRing the bell.', alarmMinutesBefore: 1440 }))
		).toEqual({
			method: 'REQUEST',
			version: '2.0',
			events: [
				{
					uid,
					sequence: 0,
					status: 'CONFIRMED',
					start: '2026-06-09T07:30:00.000Z',
					end: '2026-06-09T08:00:00.000Z',
					stamp: '2026-06-01T12:00:00.000Z',
					summary: 'Study visit',
					location: 'Room 1, First site',
					description: 'Please bring your card.\nRing the bell.',
					attendees: ['mailto:person@example.org'],
					alarms: [expect.stringMatching(/^-P(T1440M|1D|T24H)$/)]
				}
			]
		});
	});

	it('R-85: an update has the same UID and a higher SEQUENCE, a cancellation a higher one still', () => {
		const messages = [
			read(fileOf()),
			read(
				fileOf({
					sequence: 1,
					start: new Date('2026-06-10T07:30:00Z'),
					end: new Date('2026-06-10T08:00:00Z')
				})
			),
			read(fileOf({ sequence: 2, method: 'CANCEL' }))
		];
		expect(messages.map((each) => each.method)).toEqual(['REQUEST', 'REQUEST', 'CANCEL']);
		expect(messages.map((each) => each.events[0]?.sequence)).toEqual([0, 1, 2]);
		expect(new Set(messages.map((each) => each.events[0]?.uid))).toEqual(new Set([uid]));
		expect(messages.map((each) => each.events[0]?.status)).toEqual([
			'CONFIRMED',
			'CONFIRMED',
			'CANCELLED'
		]);
	});

	it('R-87: half past nine is another instant on each side of a change of clocks, in two zones', () => {
		// Berlin changes on 2026-03-29 and 2026-10-25, New York on 2026-03-08 and 2026-11-01 (IANA database).
		const cases = [
			['Europe/Berlin', '2026-03-28', '2026-03-28T08:30:00.000Z'],
			['Europe/Berlin', '2026-03-29', '2026-03-29T07:30:00.000Z'],
			['Europe/Berlin', '2026-10-24', '2026-10-24T07:30:00.000Z'],
			['Europe/Berlin', '2026-10-25', '2026-10-25T08:30:00.000Z'],
			['America/New_York', '2026-03-07', '2026-03-07T14:30:00.000Z'],
			['America/New_York', '2026-03-08', '2026-03-08T13:30:00.000Z'],
			['America/New_York', '2026-10-31', '2026-10-31T13:30:00.000Z'],
			['America/New_York', '2026-11-01', '2026-11-01T14:30:00.000Z']
		] as const;
		for (const [zone, date, expected] of cases) {
			const start = instantFromLocal(plainDateOf(date), '09:30', zone);
			const end = new Date(start.getTime() + 30 * 60_000);
			const text = fileOf({ start, end });
			expect(read(text).events[0], `${zone} ${date}`).toMatchObject({
				start: expected,
				end: end.toISOString()
			});
			expect(text).not.toMatch(/TZID|DTSTART:\d{8}T\d{6}\r/);
		}
	});

	it('R-88: text with CRLF and END:VEVENT stays text', () => {
		const notes =
			'First\r\nEND:VEVENT\r\nEND:VCALENDAR\r\nBEGIN:VEVENT\rSUMMARY:No\u2028x; a, b \\ c: d';
		const { events } = read(fileOf({ notes, place: 'a; b, c \\ d: END:VEVENT' }));
		expect(events).toHaveLength(1);
		expect(events[0]).toMatchObject({
			summary: 'Study visit',
			location: 'a; b, c \\ d: END:VEVENT',
			description: 'First\nEND:VEVENT\nEND:VCALENDAR\nBEGIN:VEVENT\nSUMMARY:No\nx; a, b \\ c: d'
		});
	});

	it('R-88: long and wide text comes back whole, every line at most 75 octets', () => {
		for (const piece of ['ü', 'ø', '織機', '🧵', 'a\u0301', '👩‍🌾', 'x']) {
			const notes = piece.repeat(90);
			const text = fileOf({ notes, place: piece.repeat(60) });
			for (const line of text.split('\r\n')) expect(octets(line)).toBeLessThanOrEqual(75);
			expect(text.replaceAll('\r\n', '')).not.toMatch(/[\r\n]/);
			expect(read(text).events[0]).toMatchObject({
				description: notes,
				location: piece.repeat(60)
			});
		}
	});

	it('a feed has no METHOD, and every file has VERSION, PRODID and a DTSTAMP in UTC', () => {
		const events: FeedEvent[] = [0, 1, 2].map((at) => ({
			uid: newRandomId(),
			sequence: at,
			start: new Date(`2026-06-1${at}T07:30:00Z`),
			end: new Date(`2026-06-1${at}T08:00:00Z`),
			place: 'Room 1',
			cancelled: at === 2,
			changed: now
		}));
		const made = feed(events, { now });
		if (!made.ok) throw new Error(made.problem.message);
		const found = read(made.value.text);
		expect(found.method).toBeNull();
		expect(found.events.map((each) => [each.uid, each.sequence, each.status])).toEqual(
			events.map((each) => [each.uid, each.sequence, each.cancelled ? 'CANCELLED' : 'CONFIRMED'])
		);
		for (const text of [made.value.text, fileOf(), fileOf({ method: 'CANCEL', sequence: 1 })]) {
			expect(text).toContain('VERSION:2.0\r\n');
			expect(text).toContain('PRODID:-//Heddle//Visits//EN\r\n');
			for (const stamp of text.match(/^DTSTAMP.*$/gm) ?? [])
				expect(stamp).toMatch(/^DTSTAMP:\d{8}T\d{6}Z\r?$/);
			const method = /^METHOD:(.*?)\r?$/m.exec(text)?.[1] ?? null;
			expect(read(text).method).toBe(method);
		}
		expect(contentType(made.value)).toBe('text/calendar; charset=utf-8');
		expect(mailPart(made.value)).toBeNull();
	});
});

describe('calendar files', () => {
	it('the media type names the METHOD of the file', () => {
		for (const method of ['REQUEST', 'CANCEL'] as const) {
			const made = invitation(given({ method, sequence: 1 }));
			if (!made.ok) throw new Error(made.problem.message);
			expect(contentType(made.value)).toBe(`text/calendar; charset=utf-8; method=${method}`);
			expect(mailPart(made.value)).toMatchObject({ method, filename: 'visit.ics' });
			expect(made.value.text).toContain(`METHOD:${method}\r\n`);
		}
	});

	it('R-88: a backslash before an n is no line break', () => {
		// Not for the other parser: python3-icalendar 4 takes the escaped backslash and the n apart wrongly.
		const text = fileOf({ place: 'Room \\n1' });
		expect(text).toContain('LOCATION:Room \\\\n1\r\n');
		expect(readWithIcalJs(text).events[0]?.location).toBe('Room \\n1');
	});

	it('an empty feed is a calendar without events', () => {
		const made = feed([], { now });
		if (!made.ok) throw new Error(made.problem.message);
		expect(made.value.text).toMatch(/^BEGIN:VCALENDAR\r\n[^]*END:VCALENDAR\r\n$/);
		expect(made.value.text).not.toContain('METHOD');
	});

	it.each<[string, Partial<Invitation>, string]>([
		[
			'a place with a line break',
			{ place: 'Room 1\r\nATTENDEE:mailto:x@example.org' },
			'CALENDAR_TEXT'
		],
		['a place with a bare return', { place: 'Room\r1' }, 'CALENDAR_TEXT'],
		['a place with a line separator', { place: 'Room\u20281' }, 'CALENDAR_TEXT'],
		[
			'an organiser with a line break',
			{ organiser: { name: 'A\nB', email: 'a@example.org' } },
			'CALENDAR_TEXT'
		],
		['notes with NUL', { notes: 'a\u0000b' }, 'CALENDAR_TEXT'],
		['half a character', { place: '\ud800' }, 'CALENDAR_TEXT'],
		[
			'an address with a line break',
			{ attendee: { email: 'a@example.org\r\nX:1' } },
			'CALENDAR_ADDRESS'
		],
		[
			'an address with parameters',
			{ attendee: { email: 'a;CN=x@example.org' } },
			'CALENDAR_ADDRESS'
		],
		['no address', { organiser: { name: 'A', email: '' } }, 'CALENDAR_ADDRESS'],
		['a guessable identifier', { uid: 'visit-1@heddle' }, 'CALENDAR_UID'],
		['an end before the start', { end: new Date('2026-06-09T07:30:00Z') }, 'CALENDAR_TIMES'],
		['no time at all', { start: new Date(NaN) }, 'CALENDAR_TIMES']
	])('refuses %s', (_, change, code) => {
		const made = invitation(given(change));
		expect(made.ok ? null : made.problem.code).toBe(code);
	});

	it('a quotation mark in a name does not end it', () => {
		const text = fileOf({
			organiser: { name: 'The "visit";X=1:mailto:y', email: 'desk@example.org' }
		});
		const organiser = new ICAL.Component(ICAL.parse(text) as never)
			.getFirstSubcomponent('vevent')
			?.getFirstProperty('organizer');
		expect(organiser?.getFirstValue()).toMatch(/^mailto:desk@example\.org$/i);
		expect(organiser?.getParameter('cn')).toBe('The ’visit’;X=1:mailto:y');
		expect(readWithPython(text).events).toHaveLength(1);
	});

	it('holds neutral words only', () => {
		const text = fileOf().replace(/\r\n[ \t]/g, '');
		const values = text
			.split('\r\n')
			.filter(
				(line) =>
					!/^(UID|DTSTAMP|DTSTART|DTEND|LOCATION|ORGANIZER|ATTENDEE|BEGIN|END)[:;]/.test(line)
			);
		expect(values.filter(Boolean).sort()).toEqual(
			[
				'CALSCALE:GREGORIAN',
				'METHOD:REQUEST',
				'PRODID:-//Heddle//Visits//EN',
				'SEQUENCE:0',
				'STATUS:CONFIRMED',
				'SUMMARY:Study visit',
				'VERSION:2.0',
				'X-PUBLISHED-TTL:PT1H'
			].sort()
		);
	});
});

describe('R-88: folding', () => {
	it('75 octets are one line, 76 are 75 and a space and one', () => {
		expect(fold('x'.repeat(75))).toBe('x'.repeat(75));
		expect(fold('x'.repeat(76))).toBe(`${'x'.repeat(75)}\r\n x`);
		expect(fold('x'.repeat(75 + 74))).toBe(`${'x'.repeat(75)}\r\n ${'x'.repeat(74)}`);
	});

	it('52 characters of 92 octets become lines of 74 and 19 octets', () => {
		expect(
			fold(`DESCRIPTION:${'ü'.repeat(40)}`)
				.split('\r\n')
				.map(octets)
		).toEqual([74, 19]);
	});

	it('unfolds to what it was, whatever the text, and folding again changes nothing', () => {
		fc.assert(
			fc.property(fc.string({ unit: 'grapheme', maxLength: 400 }), (raw) => {
				const line = raw.replace(/[\r\n]/g, '');
				const folded = fold(line);
				for (const each of folded.split('\r\n')) expect(octets(each)).toBeLessThanOrEqual(75);
				expect(folded.replace(/\r\n /g, '')).toBe(line);
				expect(fold(folded)).toBe(folded);
			})
		);
	});
});
