import ICAL from 'ical.js';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	bookVisit,
	cancelAppointment,
	moveAppointment
} from '../../src/lib/domain/visit/booking.commands.server';
import { systemActor } from '../../src/lib/server/actor';
import { readOwn } from '../../src/lib/server/change';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { mailContent, type MailRow } from '../../src/lib/server/mail/content';
import { sendMail } from '../../src/lib/server/mail/send';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import {
	addSubject,
	around,
	visitScene,
	type Scene,
	type SceneSubject
} from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db, { SMTP_URL: 'smtp://127.0.0.1:1', MAIL_FROM: 'Heddle <visits@heddle.test>' });
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set('2026-06-09T06:00:00Z');
	scene = await visitScene(db);
});
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const place = (date: string, time: string) => ({
	date,
	time,
	roomId: scene.sites[0].rooms[0] as string,
	staffId: scene.sites[0].nurse.id,
	outsideReason: ''
});
const mailsOf = (subject: SceneSubject): Promise<MailRow[]> =>
	readOwn(systemActor('test'), (reader) =>
		reader
			.selectFrom('mail')
			.selectAll()
			.where('subject_id', '=', subject.id)
			.orderBy('id')
			.execute()
	);
const written = (mail: MailRow) =>
	readOwn(systemActor('test'), async (reader) => mailContent[mail.kind]?.(mail, reader));

/** Booked, moved and cancelled; the mails of that. */
async function bookedMovedCancelled(email: string | null) {
	const subject = await addSubject(db, scene, {
		email,
		windows: { 'month-6': around('2026-06-16') }
	});
	const visitId = subject.visits['month-6'] as string;
	const { actor } = scene.sites[0].coordinator;
	await bookVisit(actor, scene.studyId, visitId, 1, place('2026-06-16', '09:00'));
	await moveAppointment(actor, scene.studyId, visitId, 1, place('2026-06-17', '10:00'));
	await cancelAppointment(actor, scene.studyId, visitId, 2, { reason: 'Ill' });
	return { subject, visitId, mails: await mailsOf(subject) };
}

describe('calendar mails', () => {
	test('R-85: booking, moving and cancelling send one entry under one id, each with a higher sequence', async () => {
		const { subject, mails } = await bookedMovedCancelled('wanda@example.org');
		expect(mails.map((each) => each.kind)).toEqual([
			'visit-invitation',
			'visit-moved',
			'visit-cancelled'
		]);
		const events = [];
		for (const mail of mails) {
			const content = await written(mail);
			expect(content?.to).toBe('wanda@example.org');
			const calendar = new ICAL.Component(ICAL.parse(content?.icalEvent?.content ?? ''));
			expect(calendar.getFirstPropertyValue('method')).toBe(content?.icalEvent?.method);
			const event = calendar.getFirstSubcomponent('vevent') as ICAL.Component;
			events.push({
				method: content?.icalEvent?.method,
				uid: event.getFirstPropertyValue('uid'),
				sequence: event.getFirstPropertyValue('sequence'),
				status: event.getFirstPropertyValue('status'),
				start: String(event.getFirstPropertyValue('dtstart'))
			});
			const all = `${content?.subject} ${content?.text} ${content?.html} ${content?.icalEvent?.content}`;
			expect(all).not.toContain(subject.number);
			expect(all).not.toContain('Aldermere');
			expect(all).not.toContain('AMR-01');
			expect(all).not.toContain('Month 6');
			expect(content?.text).toContain('Room 1, First site');
		}
		expect(new Set(events.map((each) => each.uid)).size).toBe(1);
		expect(events.map(({ method, sequence, status, start }) => [method, sequence, status, start]))
			// 09:00 in Berlin in June is 07:00 UTC.
			.toEqual([
				['REQUEST', 0, 'CONFIRMED', '2026-06-16T07:00:00Z'],
				['REQUEST', 1, 'CONFIRMED', '2026-06-17T08:00:00Z'],
				['CANCEL', 2, 'CANCELLED', '2026-06-17T08:00:00Z']
			]);
		const moved = await written(mails[1] as MailRow);
		expect(moved?.text).toContain('It was to be Tue 16 June 2026, 09:00 Europe/Berlin (+02:00)');
		expect(moved?.text).toContain('Wed 17 June 2026, 10:00 Europe/Berlin (+02:00)');
	});

	test('a subject without an address gets none, and the row says so', async () => {
		const { mails } = await bookedMovedCancelled(null);
		for (const mail of mails) await sendMail({ payload: { mailId: mail.id }, lastTry: false });
		const [after] = await db.sql(
			`select distinct status from app.mail where id in (${mails.map((mail) => `'${mail.id}'`).join(',')})`
		);
		expect(after).toEqual([{ status: 'no address' }]);
	});

	test('nothing is sent in the name of somebody who has died', async () => {
		const subject = await addSubject(db, scene, {
			email: 'wilma@example.org',
			windows: { 'month-6': around('2026-06-18') }
		});
		const visitId = subject.visits['month-6'] as string;
		const { actor } = scene.sites[0].coordinator;
		await bookVisit(actor, scene.studyId, visitId, 1, place('2026-06-18', '09:00'));
		await asOwner(db, (client) =>
			client.query(
				`insert into app.study_exit (id, study_id, site_id, subject_id, kind, happened_on)
				values (gen_random_uuid(), $1, $2, $3, 'died', '2026-06-08')`,
				[scene.studyId, scene.sites[0].id, subject.id]
			)
		);
		await cancelAppointment(actor, scene.studyId, visitId, 1, { reason: 'Died' });
		expect((await mailsOf(subject)).map((each) => each.kind)).toEqual(['visit-invitation']);
	});

	test('a refused booking sends nothing', async () => {
		const subject = await addSubject(db, scene, {
			email: 'wera@example.org',
			windows: { 'month-6': around('2026-06-18') }
		});
		await bookVisit(
			scene.sites[0].coordinator.actor,
			scene.studyId,
			subject.visits['month-6'] as string,
			1,
			place('2026-06-14', '09:00')
		).catch(() => undefined);
		expect(await mailsOf(subject)).toEqual([]);
	});
});
