import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { bookVisit } from '../../src/lib/domain/visit/booking.commands.server';
import { declareMissed, logContact } from '../../src/lib/domain/visit/chase.commands.server';
import { getChase } from '../../src/lib/domain/visit/chase.reads.server';
import { logContactInput } from '../../src/lib/domain/visit/visit.input';
import { windowsQuery } from '../../src/lib/domain/visit/windows.input';
import { findWindows } from '../../src/lib/domain/visit/windows.reads.server';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { refusal } from '../support/refusals';
import { addActor, addSubject, around, visitScene, type Scene } from '../support/visit-scene';

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

const coordinator = () => scene.sites[0].coordinator.actor;
const due = async (day: string, site = scene.sites[0]) => {
	const subject = await addSubject(db, scene, { site, windows: { 'month-6': around(day) } });
	return { subject, visitId: subject.visits['month-6'] as string };
};

describe('the chase', () => {
	test('a visit is declared missed with a reason, and only once its window has passed', async () => {
		// The last day of the window is today.
		const { visitId } = await due('2026-06-02');
		const told = await refusal(
			declareMissed(coordinator(), scene.studyId, visitId, 1, { reason: 'Gone away' }),
			'NOT_PASSED'
		);
		expect(told.message).toContain('9 Jun 2026');
		clock.set('2026-06-10T06:00:00Z');
		await declareMissed(coordinator(), scene.studyId, visitId, 1, { reason: 'Gone away' });
		const [visits, deviations] = await db.sql(
			`select status, missed_reason from app.visit where id = '${visitId}'`,
			`select category, detail from app.deviation where visit_id = '${visitId}'`
		);
		expect(visits?.[0]).toEqual({ status: 'missed', missed_reason: 'Gone away' });
		expect(deviations).toHaveLength(1);
		expect(deviations?.[0]).toMatchObject({ category: 'missed visit' });
		await refusal(
			declareMissed(coordinator(), scene.studyId, visitId, 2, { reason: 'Again' }),
			'VISIT_STATE'
		);
		clock.set('2026-06-09T06:00:00Z');
	});

	test('an appointment that was not kept ends with it', async () => {
		const { visitId } = await due('2026-06-12');
		await bookVisit(coordinator(), scene.studyId, visitId, 1, {
			date: '2026-06-12',
			time: '09:00',
			roomId: scene.sites[0].rooms[0] as string,
			staffId: scene.sites[0].nurse.id,
			outsideReason: ''
		});
		clock.set('2026-06-20T06:00:00Z');
		await declareMissed(coordinator(), scene.studyId, visitId, 2, { reason: 'Did not come' });
		const [rows] = await db.sql(`select status from app.appointment where visit_id = '${visitId}'`);
		expect(rows).toEqual([{ status: 'cancelled' }]);
		clock.set('2026-06-09T06:00:00Z');
	});

	test('attempts are kept in order with who, how and what next; one ahead of now is refused', async () => {
		const { visitId } = await due('2026-05-20');
		const log = (given: object) =>
			logContact(
				coordinator(),
				scene.studyId,
				visitId,
				logContactInput.parse({ way: 'telephone', outcome: 'no answer', ...given })
			);
		await log({ at: '2026-06-08T10:00:00+02:00', tryAgainOn: '2026-06-11' });
		await log({ way: 'letter', outcome: 'message left', nextStep: 'Wait a week' });
		await refusal(log({ at: '2026-06-09T10:00:00+02:00' }), 'FUTURE');
		await refusal(log({ tryAgainOn: '2026-06-01' }), 'RULE');
		const chase = await getChase(coordinator(), scene.studyId, visitId);
		expect(
			chase.contacts.map((each) => [each.way, each.outcome, each.nextStep, each.tryAgainOn])
		).toEqual([
			['letter', 'message left', 'Wait a week', null],
			['telephone', 'no answer', null, '11 Jun 2026']
		]);
		expect(chase.contact?.phone).toBe('+49 30 000000');
		const monitor = await addActor(db, 'Mona Reed', 'monitor', scene.studyId, scene.sites[0].id);
		const read = await getChase(monitor.actor, scene.studyId, visitId, 'subject.read');
		expect(read.contact).toBeNull();
		await refusal(
			logContact(
				monitor.actor,
				scene.studyId,
				visitId,
				logContactInput.parse({ way: 'letter', outcome: 'reached' })
			),
			'NOT_PERMITTED'
		);
	});
});

describe('windows', () => {
	test('stand by time left, passed ones last, page by page without a gap, each site by its own today', async () => {
		const other = await visitScene(db, { code: 'LGC-2' });
		const [here, there] = other.sites;
		const make = (day: string, site = here, before = 7, after = 7) =>
			addSubject(db, other, { site, windows: { 'month-3': around(day, before, after) } });
		// Today is 9 June in Berlin.
		const closesTomorrow = await make('2026-06-03');
		const closesIn10 = await make('2026-06-12');
		const passed4 = await make('2026-05-29');
		const passed20 = await make('2026-05-13');
		const notOpen = await make('2026-06-25');
		const elsewhere = await make('2026-06-04', there);
		const actor = here.coordinator.actor;
		const ask = async (query: object) =>
			findWindows(actor, other.studyId, windowsQuery.parse(query));
		const all = await ask({});
		expect(all.items.map((each) => each.subjectId)).toEqual(
			[closesTomorrow, closesIn10, passed4, passed20].map((each) => each.id)
		);
		expect(all.items.map((each) => each.left.text)).toEqual([
			'closes in 1 day',
			'10 days left',
			'passed 4 days ago',
			'passed 20 days ago'
		]);
		let cursor: string | null = '';
		const walked: string[] = [];
		while (cursor !== null) {
			const page: Awaited<ReturnType<typeof ask>> = await ask({ cursor, limit: 1 });
			walked.push(...page.items.map((each) => each.subjectId));
			cursor = page.nextCursor;
		}
		expect(walked).toEqual(all.items.map((each) => each.subjectId));
		const subjects = async (query: object) =>
			(await ask(query)).items.map((each) => each.subjectId);
		expect(await subjects({ what: 'closing' })).toEqual([closesTomorrow.id]);
		expect(await subjects({ what: 'passed' })).toEqual([passed4.id, passed20.id]);
		expect(await subjects({ what: 'ahead' })).toEqual([notOpen.id]);
		expect(await subjects({ text: closesIn10.number })).toEqual([closesIn10.id]);
		expect(await subjects({ text: '%' })).toEqual([]);
		await refusal(ask({ site: there.id }), 'NOT_FOUND');
		await refusal(ask({ cursor: 'x; drop' }), 'INVALID');
		const byManager = await findWindows(
			other.manager.actor,
			other.studyId,
			windowsQuery.parse({ what: 'closing' })
		);
		expect(byManager.items.map((each) => each.subjectId)).toContain(elsewhere.id);
	});

	test('say the last step: booked, tried, or nothing yet', async () => {
		const { visitId } = await due('2026-06-10');
		const mine = async () =>
			(
				await findWindows(coordinator(), scene.studyId, windowsQuery.parse({ limit: 100 }))
			).items.find((each) => each.visitId === visitId);
		expect((await mine())?.lastStep).toBe('not booked');
		await logContact(
			coordinator(),
			scene.studyId,
			visitId,
			logContactInput.parse({ way: 'telephone', outcome: 'no answer', tryAgainOn: '2026-06-11' })
		);
		expect((await mine())?.lastStep).toBe(
			'telephone: no answer, 9 Jun 2026; try again 11 Jun 2026'
		);
		await bookVisit(coordinator(), scene.studyId, visitId, 1, {
			date: '2026-06-11',
			time: '14:00',
			roomId: scene.sites[0].rooms[1] as string,
			staffId: scene.sites[0].nurse.id,
			outsideReason: ''
		});
		expect(await mine()).toMatchObject({
			status: 'booked',
			bookedOn: '2026-06-11',
			lastStep: 'booked Thu 11 Jun, 14:00'
		});
	});
});
