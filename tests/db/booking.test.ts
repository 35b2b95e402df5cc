import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	bookVisit,
	cancelAppointment,
	moveAppointment
} from '../../src/lib/domain/visit/booking.commands.server';
import { findFreeTimes } from '../../src/lib/domain/visit/booking.reads.server';
import { startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import type { BookVisitInput } from '../../src/lib/domain/visit/visit.input';
import type { RefusalCode } from '../../src/lib/refusal';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { refusal } from '../support/refusals';
import { addSubject, around, visitScene, type Scene, type SceneSite } from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;
let berlin: SceneSite;
let newYork: SceneSite;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set('2026-06-09T06:00:00Z');
	scene = await visitScene(db);
	[berlin, newYork] = scene.sites;
});
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const at = (site: SceneSite, date: string, time: string, more: Partial<BookVisitInput> = {}) => ({
	date,
	time,
	roomId: site.rooms[0] as string,
	staffId: site.nurse.id,
	outsideReason: '',
	...more
});
const subjectDue = (day: string, site = berlin, email: string | null = null) =>
	addSubject(db, scene, { site, email, windows: { 'month-6': around(day) } });
const visitOf = async (id: string) =>
	(await db.sql(`select * from app.visit where id = '${id}'`))[0]?.[0];
const appointmentOf = async (visitId: string) =>
	(
		await db.sql(
			`select * from app.appointment where visit_id = '${visitId}' order by id desc limit 1`
		)
	)[0]?.[0];
const book = async (
	site: SceneSite,
	visitId: string,
	input: BookVisitInput,
	version = 1
): Promise<Awaited<ReturnType<typeof bookVisit>>> =>
	bookVisit(site.coordinator.actor, scene.studyId, visitId, version, input);
const refused = (work: Promise<unknown>, code: RefusalCode) => refusal(work, code);

describe('booking', () => {
	test('keeps the instant, the site’s zone and a random calendar id, and the visit is booked', async () => {
		const subject = await subjectDue('2026-06-11');
		const visitId = subject.visits['month-6'] as string;
		const made = await book(berlin, visitId, at(berlin, '2026-06-11', '09:00'));
		expect(made.startsAt.toISOString()).toBe('2026-06-11T07:00:00.000Z');
		const row = await appointmentOf(visitId);
		expect(row).toMatchObject({
			zone: 'Europe/Berlin',
			status: 'booked',
			calendar_sequence: 0,
			outside_reason: null
		});
		expect(row.calendar_uid).toMatch(/^[0-9a-f]{8}-[0-9a-f]{4}-4/);
		expect((row.ends_at.getTime() - row.starts_at.getTime()) / 60_000).toBe(45);
		expect(await visitOf(visitId)).toMatchObject({ status: 'booked', version: 2 });
	});

	test('a room, a person and a subject are each taken once, by the database', async () => {
		const [one, two] = [await subjectDue('2026-06-12'), await subjectDue('2026-06-12')];
		await book(berlin, one.visits['month-6'] as string, at(berlin, '2026-06-12', '09:00'));
		const second = two.visits['month-6'] as string;
		const other = berlin.rooms[1] as string;
		await refused(book(berlin, second, at(berlin, '2026-06-12', '09:30')), 'ROOM_TAKEN');
		const byField = await refused(
			book(berlin, second, at(berlin, '2026-06-12', '09:30', { roomId: other })),
			'STAFF_TAKEN'
		);
		expect(byField.fields.staffId).toBe('That person has another visit at this time.');
		expect(await visitOf(second)).toMatchObject({ status: 'planned', version: 1 });
		// Visits that only touch do not overlap.
		await book(berlin, second, at(berlin, '2026-06-12', '09:45'));
	});

	test('of two bookings of the same room made at the same moment exactly one is kept', async () => {
		for (const time of ['08:00', '08:45', '09:30', '10:15', '11:00']) {
			const [one, two] = [await subjectDue('2026-06-15'), await subjectDue('2026-06-15')];
			const results = await Promise.allSettled(
				[one, two].map((subject) =>
					book(berlin, subject.visits['month-6'] as string, at(berlin, '2026-06-15', time))
				)
			);
			expect(results.filter((each) => each.status === 'fulfilled')).toHaveLength(1);
			const lost = results.find((each) => each.status === 'rejected');
			expect(lost?.reason).toMatchObject({ code: 'ROOM_TAKEN' });
			const [kept] = await db.sql(
				`select count(*)::int as n from app.appointment where status = 'booked' and visit_id in ('${one.visits['month-6']}', '${two.visits['month-6']}')`
			);
			expect(kept?.[0].n).toBe(1);
		}
	});

	test('of two people booking the same visit at once one finds it booked', async () => {
		const subject = await subjectDue('2026-06-16');
		const visitId = subject.visits['month-6'] as string;
		const results = await Promise.allSettled([
			book(berlin, visitId, at(berlin, '2026-06-16', '09:00')),
			book(berlin, visitId, at(berlin, '2026-06-16', '13:15', { roomId: berlin.rooms[1] }))
		]);
		expect(results.filter((each) => each.status === 'fulfilled')).toHaveLength(1);
	});

	test('outside the window a reason is needed, and is kept', async () => {
		const subject = await subjectDue('2026-06-18');
		const visitId = subject.visits['month-6'] as string;
		const told = await refused(
			book(berlin, visitId, at(berlin, '2026-06-26', '09:00')),
			'OUTSIDE_WINDOW'
		);
		expect(told.message).toContain('26 Jun 2026 is outside the window 11 Jun 2026 to 25 Jun 2026');
		expect(told.fields.outsideReason).toBeTruthy();
		await book(
			berlin,
			visitId,
			at(berlin, '2026-06-26', '09:00', { outsideReason: 'Away until then' })
		);
		expect((await appointmentOf(visitId)).outside_reason).toBe('Away until then');
	});

	test('opening hours, passed times, other sites’ rooms and people without a role on that day are refused', async () => {
		const subject = await subjectDue('2026-06-17');
		const visitId = subject.visits['month-6'] as string;
		const attempt = (input: BookVisitInput, code: RefusalCode) =>
			refused(book(berlin, visitId, input), code);
		expect((await attempt(at(berlin, '2026-06-17', '12:15'), 'OUTSIDE_HOURS')).message).toContain(
			'08:00 to 12:30 and 13:15 to 17:00'
		);
		await attempt(at(berlin, '2026-06-14', '09:00'), 'OUTSIDE_HOURS');
		await attempt(at(berlin, '2026-06-09', '07:30', { outsideReason: 'x' }), 'RULE');
		await attempt(at(berlin, '2026-06-17', '09:00', { roomId: newYork.rooms[0] }), 'RULE');
		await attempt(at(berlin, '2026-06-17', '09:00', { staffId: newYork.nurse.id }), 'RULE');
		await asOwner(db, (client) =>
			client.query(
				`update app.person_role set valid_to = '2026-06-16' where person_id = $1 and role = 'nurse'`,
				[berlin.nurse.id]
			)
		);
		const ended = await attempt(at(berlin, '2026-06-17', '09:00'), 'RULE');
		expect(ended.fields.staffId).toContain('no role at the site on that day');
		await asOwner(db, (client) =>
			client.query(`update app.person_role set valid_to = null where person_id = $1`, [
				berlin.nurse.id
			])
		);
	});

	test('a coordinator books at the own site only; another study’s visit is not found', async () => {
		const subject = await subjectDue('2026-06-19');
		const visitId = subject.visits['month-6'] as string;
		const input = at(berlin, '2026-06-19', '09:00');
		await refused(
			bookVisit(newYork.coordinator.actor, scene.studyId, visitId, 1, input),
			'NOT_FOUND'
		);
		await refused(bookVisit(berlin.nurse.actor, scene.studyId, visitId, 1, input), 'NOT_PERMITTED');
		const other = await visitScene(db, { code: 'LGC-2' });
		await refused(
			bookVisit(other.sites[0].coordinator.actor, other.studyId, visitId, 1, input),
			'NOT_FOUND'
		);
	});

	test('nothing is booked for a subject who has left', async () => {
		const subject = await subjectDue('2026-06-19');
		await asOwner(db, (client) =>
			client.query(
				`insert into app.study_exit (id, study_id, site_id, subject_id, kind, happened_on)
				values (gen_random_uuid(), $1, $2, $3, 'stopped visits', '2026-06-01')`,
				[scene.studyId, berlin.id, subject.id]
			)
		);
		await refused(
			book(berlin, subject.visits['month-6'] as string, at(berlin, '2026-06-19', '09:00')),
			'LEFT_STUDY'
		);
	});

	// Clock changes: tz database. Berlin 2026-10-25 and 2027-03-28, New York 2026-11-01 and 2027-03-14.
	test.each([
		['Berlin before summer time ends', 0, '2026-10-23', '09:00', '2026-10-23T07:00:00.000Z'],
		['Berlin after summer time ended', 0, '2026-10-26', '09:00', '2026-10-26T08:00:00.000Z'],
		['New York before summer time ends', 1, '2026-10-30', '09:00', '2026-10-30T13:00:00.000Z'],
		['New York after summer time ended', 1, '2026-11-02', '09:00', '2026-11-02T14:00:00.000Z'],
		['Berlin before summer time begins', 0, '2027-03-26', '09:00', '2027-03-26T08:00:00.000Z'],
		['Berlin after summer time began', 0, '2027-03-29', '09:00', '2027-03-29T07:00:00.000Z']
	] as const)('nine o’clock is nine o’clock: %s', async (_name, index, date, time, instant) => {
		const site = scene.sites[index];
		const subject = await subjectDue(date, site);
		const made = await book(site, subject.visits['month-6'] as string, at(site, date, time));
		expect(made.startsAt.toISOString()).toBe(instant);
	});

	test('a time that clocks skip is refused', async () => {
		const subject = await subjectDue('2027-03-28');
		const told = await refused(
			book(berlin, subject.visits['month-6'] as string, at(berlin, '2027-03-28', '02:30')),
			'RULE'
		);
		expect(told.fields.time).toContain('there is no 02:30');
	});
});

describe('moving and cancelling', () => {
	test('R-85: each move raises the sequence by one, cancelling too, and the calendar id stays', async () => {
		const subject = await subjectDue('2026-07-07');
		const visitId = subject.visits['month-6'] as string;
		await book(berlin, visitId, at(berlin, '2026-07-07', '09:00'));
		const first = await appointmentOf(visitId);
		const actor = berlin.coordinator.actor;
		await moveAppointment(actor, scene.studyId, visitId, 1, at(berlin, '2026-07-08', '10:00'));
		await moveAppointment(actor, scene.studyId, visitId, 2, at(berlin, '2026-07-08', '10:15'));
		expect(await appointmentOf(visitId)).toMatchObject({
			calendar_uid: first.calendar_uid,
			calendar_sequence: 2,
			version: 3
		});
		await refused(
			moveAppointment(actor, scene.studyId, visitId, 2, at(berlin, '2026-07-09', '09:00')),
			'STALE'
		);
		await refused(cancelAppointment(actor, scene.studyId, visitId, 1, { reason: 'Ill' }), 'STALE');
		await cancelAppointment(actor, scene.studyId, visitId, 3, { reason: 'Ill' });
		expect(await appointmentOf(visitId)).toMatchObject({
			id: first.id,
			calendar_uid: first.calendar_uid,
			calendar_sequence: 3,
			status: 'cancelled'
		});
		expect(await visitOf(visitId)).toMatchObject({ status: 'planned' });
		const [why] = await db.sql(
			`select reason from audit.event where record = 'appointment' and record_id = '${first.id}' order by id desc limit 1`
		);
		expect(why?.[0].reason).toBe('Ill');
		// A new booking is a new entry in the calendar.
		await book(berlin, visitId, at(berlin, '2026-07-08', '10:00'), 3);
		expect((await appointmentOf(visitId)).calendar_uid).not.toBe(first.calendar_uid);
	});

	test('a walk-in on another day cancels the appointment that will not be kept', async () => {
		const subject = await subjectDue('2026-06-10');
		const visitId = subject.visits['month-6'] as string;
		await book(berlin, visitId, at(berlin, '2026-06-10', '15:00'));
		await startVisit(berlin.nurse.actor, scene.studyId, visitId, 2);
		expect(await appointmentOf(visitId)).toMatchObject({
			status: 'cancelled',
			calendar_sequence: 1
		});
		expect(await visitOf(visitId)).toMatchObject({
			status: 'under way',
			happened_on: expect.anything()
		});
	});
});

describe('free times', () => {
	test('leave out what the room or the person has, and nothing for another room and person', async () => {
		const [one, two] = [await subjectDue('2026-08-04'), await subjectDue('2026-08-04')];
		await book(berlin, one.visits['month-6'] as string, at(berlin, '2026-08-04', '08:00'));
		const ask = async (query: { roomId?: string; staffId?: string }) =>
			(
				await findFreeTimes(
					berlin.coordinator.actor,
					scene.studyId,
					two.visits['month-6'] as string,
					{ date: '2026-08-04', ...query }
				)
			).times;
		expect((await ask({ roomId: berlin.rooms[0] }))[0]).toBe('08:45');
		expect((await ask({ staffId: berlin.nurse.id }))[0]).toBe('08:45');
		expect((await ask({ roomId: berlin.rooms[1], staffId: berlin.coordinator.id }))[0]).toBe(
			'08:00'
		);
	});
});
