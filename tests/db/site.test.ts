import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { approveSite, closeSite, reopenSite } from '../../src/lib/domain/site/site.commands.server';
import { findSiteViews } from '../../src/lib/domain/site/site.reads.server';
import { bookVisit } from '../../src/lib/domain/visit/booking.commands.server';
import { findFreeTimes } from '../../src/lib/domain/visit/booking.reads.server';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { enrolOne, makeScene } from '../support/scene';
import { refusal } from '../support/refusals';
import { addSubject, around, visitScene, type Scene } from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;
const now = '2026-06-09T06:00:00Z';

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set(now);
	scene = await visitScene(db);
});
beforeEach(() => clock.set(now));
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const site = async (at: 0 | 1) => {
	const found = await findSiteViews(scene.manager.actor, scene.studyId);
	const view = found.find((each) => each.id === scene.sites[at].id);
	if (!view) throw new Error('The site is not there');
	return view;
};
const coordinator = () => scene.sites[0].coordinator.actor;

describe('approval of a site', () => {
	test('R-29: nobody is enrolled at a site before its approval is recorded', async () => {
		const trial = await makeScene(db);
		const [first] = await findSiteViews(trial.manager, trial.studyId);
		if (!first) throw new Error('The trial has no site');
		await asOwner(db, (client) =>
			client.query(`update app.site set approved_on = null where id = $1`, [first.id])
		);
		await refusal(enrolOne(trial), 'SITE_NOT_APPROVED');
		const version = async () =>
			(await findSiteViews(trial.manager, trial.studyId))[0]?.version as number;
		const approve = async (approvedOn: string) =>
			approveSite(trial.manager, trial.studyId, first.id, { approvedOn }, await version());
		await refusal(approve('2026-06-10'), 'FUTURE');
		// Approved, but later than the day of enrolment.
		await approve('2026-03-03');
		await refusal(enrolOne(trial), 'SITE_NOT_APPROVED');
		await approve('2026-03-02');
		await enrolOne(trial);
		await refusal(approve('2026-03-03'), 'RULE');
		await refusal(
			approveSite(trial.manager, trial.studyId, first.id, { approvedOn: '2026-03-01' }, 1),
			'STALE'
		);
		await refusal(
			approveSite(
				trial.coordinator,
				trial.studyId,
				first.id,
				{ approvedOn: '2026-03-01' },
				await version()
			),
			'NOT_PERMITTED'
		);
		const [[event]] = (await db.sql(
			`select before, after from audit.event where record = 'site' and record_id = '${first.id}' and action = 'change' order by id desc limit 1`
		)) as [{ before: object; after: object }[]];
		expect(event).toEqual({
			before: { approved_on: '2026-03-03' },
			after: { approved_on: '2026-03-02' }
		});
	});
});

describe('closing a site on some days', () => {
	const closing = { from: '2026-06-10', to: '2026-06-12', reason: 'Move of the clinic' };

	test('offers no time then, refuses a booking, and lists the appointments it meets; taken back, all is as before', async () => {
		const windows = { 'month-6': around('2026-06-10') };
		const [booked, other] = [
			await addSubject(db, scene, { windows }),
			await addSubject(db, scene, { windows })
		];
		const [room = ''] = scene.sites[0].rooms;
		const input = {
			date: '2026-06-10',
			time: '10:00',
			roomId: room,
			staffId: scene.sites[0].nurse.id,
			outsideReason: ''
		};
		await bookVisit(
			coordinator(),
			scene.studyId,
			booked.visits['month-6'] as string,
			1,
			input as never
		);
		const { version } = await closeSite(
			coordinator(),
			scene.studyId,
			scene.sites[0].id,
			closing,
			(await site(0)).version
		);
		const view = (await findSiteViews(coordinator(), scene.studyId))[0];
		expect(view?.closures).toMatchObject([
			{ ...closing, bookings: [{ visitId: booked.visits['month-6'], number: booked.number }] }
		]);
		const free = () =>
			findFreeTimes(coordinator(), scene.studyId, other.visits['month-6'] as string, {
				date: '2026-06-11'
			});
		expect((await free()).times).toEqual([]);
		const refused = await refusal(
			bookVisit(coordinator(), scene.studyId, other.visits['month-6'] as string, 1, {
				...input,
				date: '2026-06-11'
			} as never),
			'RULE'
		);
		expect(refused.fields.date).toBe('The site is closed on that day: Move of the clinic.');
		await reopenSite(coordinator(), scene.studyId, scene.sites[0].id, closing, version);
		expect((await free()).times.length).toBeGreaterThan(0);
	});

	test('refuses days that are inside out, that overlap, of another site, and a stale page', async () => {
		const close = async (change: Partial<typeof closing>, at: 0 | 1 = 0, version?: number) =>
			closeSite(
				coordinator(),
				scene.studyId,
				scene.sites[at].id,
				{ ...closing, ...change },
				version ?? (await site(at)).version
			);
		await refusal(close({ from: '2026-06-13' }), 'RULE');
		await close({});
		await refusal(close({ from: '2026-06-12', to: '2026-06-30' }), 'RULE');
		await refusal(close({ from: '2026-07-01', to: '2026-07-02' }, 0, 1), 'STALE');
		await refusal(close({ from: '2026-07-01', to: '2026-07-02' }, 1), 'NOT_PERMITTED');
		expect((await site(0)).closures).toHaveLength(1);
	});
});
