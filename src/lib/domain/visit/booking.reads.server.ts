import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { plainDateOf, type PlainDate } from '$lib/time/dates';
import { dateInZone, dayInZone, instantText, timeInZone } from '$lib/time/zones';
import { freeTimes } from './free-times';
import { getVisit, scopeOfVisit, visitsEndedOn, type VisitRow } from './visit.reads.server';

export interface StaffMember {
	id: string;
	name: string;
}

/** Who may take visits at the site on that day: by the grants in force on it, not today's. */
export const staffOn = (
	reader: Reader,
	studyId: string,
	siteId: string,
	on: PlainDate
): Promise<StaffMember[]> =>
	reader
		.selectFrom('person as p')
		.select(['p.id', 'p.name'])
		.where('p.active', '=', true)
		.where((where) =>
			where.exists(
				where
					.selectFrom('person_role as r')
					.select('r.id')
					.whereRef('r.person_id', '=', 'p.id')
					.where('r.role', 'in', ['nurse', 'investigator', 'coordinator'])
					.where('r.study_id', '=', studyId)
					.where((inner) =>
						inner.or([inner('r.site_id', 'is', null), inner('r.site_id', '=', siteId)])
					)
					.where('r.valid_from', '<=', on)
					.where((inner) =>
						inner.or([inner('r.valid_to', 'is', null), inner('r.valid_to', '>=', on)])
					)
			)
		)
		.orderBy(sql`lower(p.name)`)
		.orderBy('p.id')
		.execute();

export interface OpenBooking {
	appointmentId: string;
	version: number;
	roomId: string;
	room: string;
	staffId: string;
	staff: string;
	date: PlainDate;
	time: string;
	/** The whole moment in words, with its zone. */
	text: string;
	outsideReason: string | null;
}

async function openBooking(reader: Reader, visit: VisitRow): Promise<OpenBooking | null> {
	const row = await reader
		.selectFrom('appointment as a')
		.innerJoin('room as r', 'r.id', 'a.room_id')
		.innerJoin('person as p', 'p.id', 'a.staff_id')
		.select([
			'a.id',
			'a.version',
			'a.room_id',
			'r.name as room',
			'a.staff_id',
			'p.name as staff',
			'a.starts_at',
			'a.outside_reason'
		])
		.where('a.visit_id', '=', visit.id)
		.where('a.status', '=', 'booked')
		.executeTakeFirst();
	if (!row) return null;
	return {
		appointmentId: row.id,
		version: row.version,
		roomId: row.room_id,
		room: row.room,
		staffId: row.staff_id,
		staff: row.staff,
		date: dateInZone(row.starts_at, visit.site.zone),
		time: timeInZone(row.starts_at, visit.site.zone),
		text: instantText(row.starts_at, visit.site.zone),
		outsideReason: row.outside_reason
	};
}

export interface FreeTimesAnswer {
	date: string;
	times: string[];
	staff: StaffMember[];
}

/** What is free on a day for a room and a person, either of which may be left open. */
async function freeOn(
	reader: Reader,
	visit: VisitRow,
	date: PlainDate,
	wanted: { roomId?: string; staffId?: string }
): Promise<FreeTimesAnswer> {
	const day = dayInZone(date, visit.site.zone);
	const taken = await reader
		.selectFrom('appointment')
		.select(['starts_at', 'ends_at'])
		.where('site_id', '=', visit.site.id)
		.where('status', '=', 'booked')
		.where('visit_id', '!=', visit.id)
		.where('starts_at', '<', day.end)
		.where('starts_at', '>', new Date(day.start.getTime() - 12 * 3_600_000))
		.where((where) =>
			where.or([
				where('subject_id', '=', visit.subjectId),
				...(wanted.roomId ? [where('room_id', '=', wanted.roomId)] : []),
				...(wanted.staffId ? [where('staff_id', '=', wanted.staffId)] : [])
			])
		)
		.execute();
	return {
		date,
		times: freeTimes({
			opening: visit.site.opening,
			closures: visit.site.closures,
			zone: visit.site.zone,
			date,
			minutes: visit.lengthMinutes,
			taken: taken.map((each) => ({ start: each.starts_at, end: each.ends_at })),
			now: clock.now()
		}).map((each) => each.time),
		staff: await staffOn(reader, visit.studyId, visit.site.id, date)
	};
}

export async function findFreeTimes(
	actor: Actor,
	studyId: string,
	visitId: string,
	query: { date: string; roomId?: string; staffId?: string }
): Promise<FreeTimesAnswer> {
	const scope = await scopeOfVisit(actor, 'visit.book', studyId, visitId);
	return read(actor, 'visit.book', scope, async (reader) =>
		freeOn(reader, await getVisit(reader, studyId, visitId), plainDateOf(query.date), query)
	);
}

/** All that the booking page shows. Without a chosen day: the booked one, else the next day inside the window. */
export async function getBookingPage(
	actor: Actor,
	studyId: string,
	visitId: string,
	chosen: { date?: PlainDate; roomId?: string; staffId?: string }
) {
	const scope = await scopeOfVisit(actor, 'visit.book', studyId, visitId);
	return read(actor, 'visit.book', scope, async (reader) => {
		const visit = await getVisit(reader, studyId, visitId);
		const booking = await openBooking(reader, visit);
		const rooms = await reader
			.selectFrom('room')
			.select(['id', 'name'])
			.where('site_id', '=', visit.site.id)
			.orderBy('name')
			.execute();
		const date = chosen.date ?? booking?.date ?? firstDay(visit);
		const roomId = chosen.roomId ?? booking?.roomId ?? rooms[0]?.id;
		const staffId = chosen.staffId ?? booking?.staffId;
		const mail = await reader
			.selectFrom('mail')
			.select(['kind', 'status', 'created_at'])
			.where('study_id', '=', studyId)
			.where('subject_id', '=', visit.subjectId)
			.orderBy('created_at', 'desc')
			.limit(1)
			.executeTakeFirst();
		return {
			visit,
			booking,
			rooms,
			left: (await visitsEndedOn(reader, visit.subjectId)) !== null,
			chosen: { date, roomId: roomId ?? '', staffId: staffId ?? '' },
			free: await freeOn(reader, visit, date, { roomId, staffId }),
			lastMail: mail
				? {
						kind: mail.kind,
						status: mail.status,
						at: instantText(mail.created_at, visit.site.zone)
					}
				: null
		};
	});
}

function firstDay(visit: VisitRow): PlainDate {
	const { window, today } = visit;
	if (!window) return today;
	if (today > window.latest) return today;
	// Inside the window the nearest day is best; before it opens, the day meant for the visit.
	return today < window.earliest ? window.target : today;
}
