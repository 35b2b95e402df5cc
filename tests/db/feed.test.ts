import ICAL from 'ical.js';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { makeFeed, revokeFeed } from '../../src/lib/domain/feed/feed.commands.server';
import { findFeed, readFeed } from '../../src/lib/domain/feed/feed.reads.server';
import {
	bookVisit,
	cancelAppointment,
	moveAppointment
} from '../../src/lib/domain/visit/booking.commands.server';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { refusal } from '../support/refusals';
import { addSubject, around, visitScene, type Scene } from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
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

const place = (date: string, time: string, staffId: string, room = 0) => ({
	date,
	time,
	roomId: scene.sites[0].rooms[room] as string,
	staffId,
	outsideReason: ''
});
async function booked(date: string, time: string, staffId: string, room = 0) {
	const subject = await addSubject(db, scene, { windows: { 'month-6': around(date) } });
	const visitId = subject.visits['month-6'] as string;
	await bookVisit(
		scene.sites[0].coordinator.actor,
		scene.studyId,
		visitId,
		1,
		place(date, time, staffId, room)
	);
	return { subject, visitId };
}
const events = (text: string) =>
	new ICAL.Component(ICAL.parse(text)).getAllSubcomponents('vevent').map((each) => ({
		uid: String(each.getFirstPropertyValue('uid')),
		sequence: each.getFirstPropertyValue('sequence'),
		start: String(each.getFirstPropertyValue('dtstart')),
		title: each.getFirstPropertyValue('summary')
	}));

describe('the staff feed', () => {
	test('shows one’s own visits as they are moved and cancelled, in neutral words, without the subject', async () => {
		const [site] = scene.sites;
		const { token } = await makeFeed(site.nurse.actor, scene.studyId, { siteId: '' });
		const mine = await booked('2026-06-16', '09:00', site.nurse.id);
		await booked('2026-06-16', '09:00', site.coordinator.id, 1);
		const first = await readFeed(token, 'test');
		expect(events(first?.text ?? '')).toEqual([
			{
				uid: expect.any(String),
				sequence: 0,
				start: '2026-06-16T07:00:00Z',
				title: 'Study visit'
			}
		]);
		expect(first?.text).not.toContain('METHOD');
		for (const hidden of [mine.subject.number, 'Month 6', 'Aldermere', 'AMR-01'])
			expect(first?.text).not.toContain(hidden);
		expect((await readFeed(token, 'test'))?.mark).toBe(first?.mark);
		await moveAppointment(
			site.coordinator.actor,
			scene.studyId,
			mine.visitId,
			1,
			place('2026-06-17', '10:00', site.nurse.id)
		);
		const moved = await readFeed(token, 'test');
		expect(events(moved?.text ?? '')).toMatchObject([
			{
				uid: events(first?.text ?? '')[0]?.uid,
				sequence: 1,
				start: '2026-06-17T08:00:00Z'
			}
		]);
		expect(moved?.mark).not.toBe(first?.mark);
		await cancelAppointment(site.coordinator.actor, scene.studyId, mine.visitId, 2, {
			reason: 'Ill'
		});
		expect(events((await readFeed(token, 'test'))?.text ?? '')).toEqual([]);
	});

	test('of a site shows everybody’s visits there, and is not made for another site', async () => {
		const [site, other] = scene.sites;
		const { token } = await makeFeed(site.coordinator.actor, scene.studyId, { siteId: site.id });
		await booked('2026-06-18', '09:00', site.nurse.id);
		await booked('2026-06-18', '10:00', site.coordinator.id);
		expect(
			events((await readFeed(token, 'test'))?.text ?? '').filter((each) =>
				each.start.startsWith('2026-06-18')
			)
		).toHaveLength(2);
		await refusal(
			makeFeed(site.coordinator.actor, scene.studyId, { siteId: other.id }),
			'NOT_PERMITTED'
		);
		await refusal(makeFeed(scene.manager.actor, scene.studyId, { siteId: '' }), 'NOT_PERMITTED');
	});

	test('a renewed or revoked address is gone at once, and the token itself is nowhere kept', async () => {
		const { actor } = scene.sites[1].nurse;
		const first = await makeFeed(actor, scene.studyId, { siteId: '' });
		expect(await readFeed(first.token, 'test')).not.toBeNull();
		const second = await makeFeed(actor, scene.studyId, { siteId: '' });
		expect(await readFeed(first.token, 'test')).toBeNull();
		expect(await readFeed(second.token, 'test')).not.toBeNull();
		expect(await findFeed(actor, scene.studyId)).not.toBeNull();
		await revokeFeed(actor, scene.studyId);
		expect(await readFeed(second.token, 'test')).toBeNull();
		expect(await findFeed(actor, scene.studyId)).toBeNull();
		const [trail] = await db.sql(
			`select count(*)::int as n from audit.event where after::text like '%${second.token}%'`
		);
		expect(trail?.[0].n).toBe(0);
	});

	test('it ends with the role it came from, and with the account', async () => {
		const { actor, id } = scene.sites[1].coordinator;
		const { token } = await makeFeed(actor, scene.studyId, { siteId: '' });
		const set = (statement: string) => asOwner(db, (client) => client.query(statement));
		await set(`update app.person_role set valid_to = '2021-01-01' where person_id = '${id}'`);
		expect(await readFeed(token, 'test')).toBeNull();
		await set(`update app.person_role set valid_to = null where person_id = '${id}'`);
		expect(await readFeed(token, 'test')).not.toBeNull();
		await set(`update app.person set active = false where id = '${id}'`);
		expect(await readFeed(token, 'test')).toBeNull();
	});
});
