import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { recordReconsent } from '../../src/lib/domain/consent/consent.commands.server';
import { findReconsents } from '../../src/lib/domain/consent/reconsent.reads.server';
import { getFlow } from '../../src/lib/domain/flow/flow.reads.server';
import { flowBreaks } from '../../src/lib/domain/flow/flow';
import { recordMeasurement } from '../../src/lib/domain/measurement/measurement.commands.server';
import { searchContacts } from '../../src/lib/domain/subject/contact-search.server';
import { effectsOf, type ExitKind } from '../../src/lib/domain/subject/exit';
import { recordExit, takeBackExit } from '../../src/lib/domain/subject/exit.commands.server';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { transferSubject } from '../../src/lib/domain/subject/transfer.commands.server';
import { findTransfers } from '../../src/lib/domain/subject/transfer.reads.server';
import { bookVisit } from '../../src/lib/domain/visit/booking.commands.server';
import { finishVisit, startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import { getVisit, scopeOfVisit } from '../../src/lib/domain/visit/visit.reads.server';
import { read } from '../../src/lib/server/change';
import { clock } from '../../src/lib/time/clock';
import { amend } from '../support/amend';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { consentOn, enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
const today = '2026-03-10';

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});
beforeEach(async () => {
	clock.set(`${today}T12:00:00Z`);
	scene = await makeScene(db);
	await makeList(db, scene);
	end = useAs(db.appUrl);
});

const contact = (name: string) => ({
	name,
	email: 'someone@post.example',
	phone: '',
	language: 'en' as const
});

async function inStudy(name = 'Ada Reed') {
	const subject = await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
		on: today,
		contact: contact(name)
	});
	await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
	return subject;
}
const rows = async (text: string) => (await db.sql(text))[0] ?? [];
const visitsOf = (id: string) =>
	rows(
		`select v.id, p.key, v.version, v.status, v.latest::text, v.site_id, a.starts_at from app.visit v join app.planned_visit p on p.id = v.planned_visit_id
		left join app.appointment a on a.visit_id = v.id and a.status = 'booked' where v.subject_id = '${id}' order by v.position`
	);
const visit = async (id: string, key: string) =>
	(await visitsOf(id)).find((each) => each.key === key);
const count = async (id: string) => {
	const found: Record<string, number> = {};
	for (const each of await visitsOf(id)) found[each.status] = (found[each.status] ?? 0) + 1;
	return found;
};

async function book(id: string, key: string, date: string, by = scene.coordinator) {
	const one = await visit(id, key);
	const [room] = await rows(
		`select id from app.room where site_id = '${one?.site_id}' order by name`
	);
	return bookVisit(by, scene.studyId, one?.id, one?.version, {
		date,
		time: '10:00',
		roomId: room.id,
		staffId: scene.nurse.personId,
		outsideReason: ''
	});
}
const mails = (id: string) =>
	rows(`select kind, status from app.mail where subject_id = '${id}' order by created_at, id`);
const attempt = (id: string, outcome: string, at: string) =>
	asOwner(db, (client) =>
		client.query(
			`insert into app.contact_attempt (id, study_id, site_id, subject_id, at, way, outcome, by)
			values (gen_random_uuid(), $1, $2, $3, $4, 'telephone', $5, $6)`,
			[scene.studyId, scene.sites[0]?.id, id, at, outcome, scene.coordinator.personId]
		)
	);
const leave = (id: string, kind: ExitKind, happenedOn = today) =>
	recordExit(scene.coordinator, scene.studyId, id, { kind, happenedOn, reason: '' });

describe('R-56: leaving', () => {
	test.each([
		['intervention discontinued', { planned: 6, booked: 2, 'under way': 1 }, 2, []],
		[
			'stopped visits',
			{ 'not required': 8, 'under way': 1 },
			4,
			['visit-cancelled', 'visit-cancelled']
		],
		[
			'consent withdrawn',
			{ 'not required': 8, 'under way': 1 },
			4,
			['visit-cancelled', 'visit-cancelled']
		],
		[
			'lost to follow-up',
			{ 'not required': 8, 'under way': 1 },
			4,
			['visit-cancelled', 'visit-cancelled']
		],
		['died', { 'not required': 8, 'under way': 1 }, 2, []]
	] as const)('%s: what remains is what was said before', async (kind, statuses, mailed, told) => {
		const subject = await inStudy();
		const first = await visit(subject.id, 'baseline');
		const { version } = await startVisit(scene.nurse, scene.studyId, first?.id, first?.version);
		await book(subject.id, 'week-2', '2026-03-24');
		await book(subject.id, 'month-3', '2026-06-10');
		await attempt(subject.id, 'no answer', '2026-03-09T09:00:00Z');
		const before = (await visitsOf(subject.id)).map((each) => ({
			status: each.status,
			latest: each.latest,
			bookedAt: each.starts_at
		}));
		const shown = effectsOf(kind, today, before, clock.now());
		const done = await leave(subject.id, kind);
		expect(done).toMatchObject({
			visitsEnded: shown.visitsEnded,
			bookingsCancelled: shown.bookingsCancelled
		});
		expect(await count(subject.id)).toEqual(statuses);
		const written = await mails(subject.id);
		expect(written).toHaveLength(mailed);
		expect(written.slice(2).map((mail) => mail.kind)).toEqual(told);
		expect(shown.mails).toBe(told.length);
		// Whoever has died is written to no more: what waited is stopped too.
		if (kind === 'died') expect(written.every((mail) => mail.status === 'stopped')).toBe(true);
		const [weight] = await rows(
			`select id from app.measure where study_id = '${scene.studyId}' and key = 'weight'`
		);
		const enter = recordMeasurement(scene.nurse, scene.studyId, first?.id, weight.id, null, {
			entry: { kind: 'value', value: 70, unit: 'kg' },
			softAnswer: '',
			comment: '',
			reason: ''
		});
		if (kind === 'consent withdrawn') {
			await expect(enter).rejects.toMatchObject({ code: 'LEFT_STUDY' });
			// The visit that was begun ends as it stands.
			await finishVisit(scene.nurse, scene.studyId, first?.id, version);
		} else await enter;
		if (kind !== 'intervention discontinued') {
			await expect(book(subject.id, 'month-6', '2026-09-10')).rejects.toThrow();
		}
	});

	test('lost to follow-up needs as many attempts without an answer as the protocol asks for', async () => {
		await amend(db, scene, (of) => ({ ...of, lostAfterAttempts: 3 }), { reconsent: 'no' });
		const subject = await inStudy();
		await attempt(subject.id, 'no answer', '2026-03-01T09:00:00Z');
		await attempt(subject.id, 'reached', '2026-03-02T09:00:00Z');
		await attempt(subject.id, 'no answer', '2026-03-03T09:00:00Z');
		await attempt(subject.id, 'message left', '2026-03-04T09:00:00Z');
		await expect(leave(subject.id, 'lost to follow-up')).rejects.toMatchObject({
			message: expect.stringContaining('3 attempts')
		});
		await attempt(subject.id, 'wrong details', '2026-03-05T09:00:00Z');
		await leave(subject.id, 'lost to follow-up');
	});

	test('two who record at once leave one entry', async () => {
		const subject = await inStudy();
		const both = await Promise.allSettled([
			leave(subject.id, 'stopped visits'),
			leave(subject.id, 'stopped visits')
		]);
		expect(both.filter((each) => each.status === 'fulfilled')).toHaveLength(1);
		expect(
			await rows(`select 1 from app.study_exit where subject_id = '${subject.id}'`)
		).toHaveLength(1);
	});

	test('R-2: taken back it stays, marked, and the visits are to come again', async () => {
		const subject = await inStudy();
		await book(subject.id, 'month-3', '2026-06-10');
		const { id } = await leave(subject.id, 'consent withdrawn');
		const back = (because: 'entered by mistake' | 'changed mind') =>
			takeBackExit(scene.coordinator, scene.studyId, subject.id, {
				exitId: id,
				because,
				reason: 'The wrong subject was chosen.'
			});
		// Whoever withdrew and wants to go on consents anew.
		await expect(back('changed mind')).rejects.toMatchObject({ code: 'CONSENT_NEEDED' });
		clock.set('2026-03-11T12:00:00Z');
		await recordReconsent(
			scene.coordinator,
			scene.studyId,
			subject.id,
			consentOn(scene, scene.coordinator, '2026-03-11')
		);
		expect(await back('changed mind')).toMatchObject({ visitsToCome: 9 });
		expect(await count(subject.id)).toEqual({ planned: 9 });
		await expect(back('entered by mistake')).rejects.toMatchObject({ code: 'CONFLICT' });
		const record = await getSubjectRecord(scene.coordinator, scene.studyId, subject.id);
		expect(record.exits).toEqual([]);
		expect(record.items.find((item) => item.kind === 'exit')?.lines.join(' ')).toContain(
			'Taken back'
		);
		const [kept] = await rows(
			`select kind, taken_back_reason from app.study_exit where id = '${id}'`
		);
		expect(kept).toEqual({
			kind: 'consent withdrawn',
			taken_back_reason: 'The wrong subject was chosen.'
		});
	});
});

describe('moving to another site', () => {
	const move = (id: string, change: object = {}, by = scene.coordinator) =>
		transferSubject(by, scene.studyId, id, {
			siteId: scene.sites[1]?.id as string,
			transferredOn: today,
			reason: 'Moved house.',
			...change
		});

	test('takes the number, the history and the contact details along; what was collected stays in its hand', async () => {
		const subject = await inStudy('Ada Reed');
		const first = await visit(subject.id, 'baseline');
		await startVisit(scene.nurse, scene.studyId, first?.id, first?.version);
		await expect(move(subject.id)).rejects.toMatchObject({ code: 'CONFLICT' });
		const underWay = await visit(subject.id, 'baseline');
		const planned = await rows(
			`select m.id, m.key from app.planned_measure pm join app.measure m on m.id = pm.measure_id
			join app.visit v on v.planned_visit_id = pm.planned_visit_id where v.id = '${first?.id}' and m.kind <> 'derived'`
		);
		for (const measure of planned)
			await recordMeasurement(scene.nurse, scene.studyId, first?.id, measure.id, null, {
				entry: { kind: 'not done', reason: 'Subject declined' },
				softAnswer: '',
				comment: '',
				reason: ''
			});
		await finishVisit(scene.nurse, scene.studyId, first?.id, underWay?.version);
		await book(subject.id, 'month-3', '2026-06-10');
		const [before] = await rows(
			`select number, stratum, kit_number, randomised_at from app.subject where id = '${subject.id}'`
		);
		const [allocated] = await rows(
			`select id, stratum, position from closed.list_position where subject_id = '${subject.id}'`
		);
		const there = scene.sites[1]?.id as string;
		expect(await move(subject.id)).toMatchObject({ visitsMoved: 8, bookingsCancelled: 1 });

		expect(
			(
				await rows(
					`select number, stratum, kit_number, randomised_at from app.subject where id = '${subject.id}'`
				)
			)[0]
		).toEqual(before);
		expect(
			(
				await rows(
					`select id, stratum, position from closed.list_position where subject_id = '${subject.id}'`
				)
			)[0]
		).toEqual(allocated);
		const after = await visitsOf(subject.id);
		expect(after.filter((each) => each.site_id === there)).toHaveLength(8);
		expect(after.find((each) => each.key === 'baseline')?.site_id).toBe(scene.sites[0]?.id);
		expect((await mails(subject.id)).map((mail) => mail.kind)).toEqual([
			'visit-invitation',
			'visit-cancelled'
		]);

		// The new site reads all of it, the contact details too.
		const record = await getSubjectRecord(scene.other, scene.studyId, subject.id);
		expect(record.away).toBeNull();
		expect(record.contact).toMatchObject({ name: 'Ada Reed' });
		expect(record.consents).toHaveLength(1);
		const baseline = record.items.find((item) => item.visitId === first?.id);
		expect(baseline?.measurements?.length).toBeGreaterThan(0);
		const scope = await scopeOfVisit(scene.other, 'subject.read', scene.studyId, first?.id);
		await read(scene.other, 'subject.read', scope, (reader) =>
			getVisit(reader, scene.studyId, first?.id)
		);
		// But does not change what the old one collected.
		const nurse = await scene.person('nurse', there);
		await expect(
			recordMeasurement(nurse, scene.studyId, first?.id, planned[0].id, 1, {
				entry: { kind: 'value', value: 70, unit: 'kg' },
				softAnswer: '',
				comment: '',
				reason: 'Seen again.'
			})
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });

		// The old site goes on reading what it collected, and no more than that.
		const old = await getSubjectRecord(scene.coordinator, scene.studyId, subject.id);
		expect(old.away).toMatchObject({ to: 'Saltreach' });
		expect(old.contact).toBeNull();
		expect(old.ahead).toEqual([]);
		expect(old.items.some((item) => item.visitId === first?.id)).toBe(true);
		expect(old.may).toMatchObject({ exit: false, randomise: false, transfer: false });
		await expect(leave(subject.id, 'stopped visits')).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});

		// Both are told, and the trail says who, when and why.
		expect(await findTransfers(scene.other, scene.studyId)).toMatchObject([{ came: true }]);
		expect(await findTransfers(scene.coordinator, scene.studyId)).toMatchObject([{ came: false }]);
		const trail = await rows(
			`select distinct record, reason, actor from audit.event where subject_id = '${subject.id}' and reason = 'Moved house.' order by record`
		);
		expect(trail.map((event) => event.record)).toEqual(
			expect.arrayContaining(['contact_details', 'subject', 'transfer', 'visit'])
		);
		expect(new Set(trail.map((event) => event.actor))).toEqual(
			new Set([scene.coordinator.personId])
		);
		// And it goes on there.
		const nextNurse = nurse.personId;
		const one = await visit(subject.id, 'month-3');
		const [room] = await rows(`select id from app.room where site_id = '${there}'`);
		await bookVisit(scene.other, scene.studyId, one?.id, one?.version, {
			date: '2026-06-10',
			time: '10:00',
			roomId: room.id,
			staffId: nextNurse,
			outsideReason: ''
		});
		for (const actor of [scene.coordinator, scene.other]) {
			const { flow } = await getFlow(actor, scene.studyId);
			expect(flowBreaks(flow)).toEqual([]);
			expect(flow.enrolled).toBe(actor === scene.other ? 1 : 0);
		}
	});

	test('is refused where it makes no sense, and to whoever is not there', async () => {
		const subject = await inStudy();
		await expect(move(subject.id, { siteId: scene.sites[0]?.id })).rejects.toMatchObject({
			fields: { siteId: expect.any(String) }
		});
		const elsewhere = await makeScene(db);
		await expect(move(subject.id, { siteId: elsewhere.sites[0]?.id })).rejects.toMatchObject({
			fields: { siteId: expect.any(String) }
		});
		await expect(move(subject.id, { transferredOn: '2026-03-11' })).rejects.toMatchObject({
			code: 'FUTURE'
		});
		await expect(move(subject.id, { transferredOn: '2026-03-09' })).rejects.toMatchObject({
			code: 'RULE'
		});
		await expect(move(subject.id, {}, scene.other)).rejects.toMatchObject({ code: 'NOT_FOUND' });
		await expect(move(subject.id, {}, scene.nurse)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		expect(await rows(`select 1 from app.transfer where subject_id = '${subject.id}'`)).toEqual([]);
	});

	test('twice at once moves once; leaving at once does not get lost', async () => {
		const subject = await inStudy();
		const both = await Promise.allSettled([move(subject.id), move(subject.id)]);
		expect(both.filter((each) => each.status === 'fulfilled')).toHaveLength(1);
		const second = await inStudy();
		const [moved, left] = await Promise.allSettled([
			move(second.id),
			leave(second.id, 'stopped visits')
		]);
		expect([moved.status, left.status]).toContain('fulfilled');
		const [state] = await rows(
			`select (select count(*)::int from app.transfer where subject_id = '${second.id}') as moves,
			(select count(*)::int from app.study_exit where subject_id = '${second.id}') as exits`
		);
		expect(state.moves).toBe(moved.status === 'fulfilled' ? 1 : 0);
		expect(state.exits).toBe(left.status === 'fulfilled' ? 1 : 0);
	});
});

describe('searching by name', () => {
	test('finds people of one’s own sites, and each stands in the trail as read', async () => {
		const subject = await inStudy('Zoë Łukasz-Ångström');
		await inStudy('Ada Reed');
		const found = await searchContacts(scene.coordinator, scene.studyId, { name: 'angs zoe' });
		expect(found).toEqual({
			more: false,
			items: [
				{
					subjectId: subject.id,
					number: subject.number,
					site: 'Northmoor',
					name: 'Zoë Łukasz-Ångström'
				}
			]
		});
		expect((await searchContacts(scene.other, scene.studyId, { name: 'zoe' })).items).toEqual([]);
		await expect(searchContacts(scene.nurse, scene.studyId, { name: 'zoe' })).rejects.toMatchObject(
			{ code: 'NOT_PERMITTED' }
		);
		const events = await rows(
			`select action, subject_id, after::text from audit.event where record = 'contact_details' and action = 'act' and study_id = '${scene.studyId}'`
		);
		expect(events).toEqual([{ action: 'act', subject_id: subject.id, after: '{"read": true}' }]);
		// Neither what was looked for nor what was found stands anywhere in the trail as an act.
		expect(JSON.stringify(events)).not.toMatch(/zoe|Ångström|angs/i);
	});
});

describe('minors', () => {
	const minors = (of: Parameters<Parameters<typeof amend>[2]>[0]) => ({
		...of,
		minors: { majority: 18, assentFrom: 7 }
	});
	const child = () => ({
		...consentOn(scene, scene.coordinator, today),
		signedBy: 'representative' as const,
		relationship: 'mother',
		minor: true,
		assent: 'given' as const
	});

	test('R-52, R-54: come in by a representative, and are asked again on coming of age', async () => {
		await amend(db, scene, minors, { reconsent: 'no' });
		const born = { sex: 'female', 'birth-date': '2008-02-29' };
		await expect(
			enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
				on: '2026-02-27',
				characteristics: born
			})
		).rejects.toMatchObject({
			code: 'CONSENT_NEEDED',
			message: expect.stringContaining('minor')
		});
		clock.set('2026-02-27T12:00:00Z');
		const subject = await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
			on: '2026-02-27',
			characteristics: born,
			consent: { ...child(), signedOn: '2026-02-27', obtainedOn: '2026-02-27' }
		});
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks).toEqual([]);
		// The last day of February: by the rule that is said, not yet.
		clock.set('2026-02-28T12:00:00Z');
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks).toEqual([]);
		clock.set('2026-03-01T12:00:00Z');
		const [task] = (await findReconsents(scene.coordinator, scene.studyId)).tasks;
		expect(task).toMatchObject({ number: subject.number, cause: 'majority', overdue: false });
		expect(task?.because).toContain('29 February');
		clock.set('2026-04-01T12:00:00Z');
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks[0]?.overdue).toBe(true);
		await recordReconsent(
			scene.coordinator,
			scene.studyId,
			subject.id,
			consentOn(scene, scene.coordinator, '2026-04-01')
		);
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks).toEqual([]);
	});
});
