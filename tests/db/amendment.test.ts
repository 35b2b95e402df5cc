import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { createAmendment } from '../../src/lib/domain/amendment/amendment.commands.server';
import {
	recordReconsent,
	refuseReconsent
} from '../../src/lib/domain/consent/consent.commands.server';
import { findReconsents } from '../../src/lib/domain/consent/reconsent.reads.server';
import { freezeCut } from '../../src/lib/domain/cut/cut.commands.server';
import { snapshot } from '../../src/lib/domain/cut/snapshot.server';
import { publishProtocol } from '../../src/lib/domain/study/study.commands.server';
import { recordExit } from '../../src/lib/domain/subject/exit.commands.server';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { bookVisit } from '../../src/lib/domain/visit/booking.commands.server';
import { finishVisit, startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import { recordMeasurement } from '../../src/lib/domain/measurement/measurement.commands.server';
import { read } from '../../src/lib/server/change';
import { amendmentJob } from '../../src/lib/server/amendments/job';
import { clock } from '../../src/lib/time/clock';
import { amend, another, draftAmendment, withForm } from '../support/amend';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { consentOn, enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;

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
	clock.set('2026-03-10T12:00:00Z');
	scene = await makeScene(db);
	await makeList(db, scene);
	end = useAs(db.appUrl);
});

interface Row {
	id: string;
	key: string;
	name: string;
	version: number;
	status: string;
	position: number;
	earliest: string;
	target: string;
	latest: string;
	number: number;
}
const visitsOf = async (subjectId: string): Promise<Row[]> => {
	const [rows = []] = await db.sql(
		`select v.id, p.key, v.name, v.version, v.status, v.position, v.earliest::text, v.target::text, v.latest::text, pv.number
		from app.visit v join app.planned_visit p on p.id = v.planned_visit_id
		join app.protocol_version pv on pv.id = p.protocol_version_id
		where v.subject_id = '${subjectId}' order by v.position, v.id`
	);
	return rows as Row[];
};
const by = (rows: Row[]) => Object.fromEntries(rows.map((row) => [row.key, row]));

/** Enrolled and randomised on 10 March. */
async function inStudy() {
	const subject = await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
		on: '2026-03-10'
	});
	await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
	return subject;
}

async function book(subjectId: string, key: string, date: string) {
	const visit = by(await visitsOf(subjectId))[key];
	const [rooms = []] = await db.sql(
		`select id from app.room where site_id = '${scene.sites[0]?.id}' order by name`
	);
	return bookVisit(scene.coordinator, scene.studyId, visit?.id ?? '', visit?.version ?? 0, {
		date,
		time: '10:00',
		roomId: rooms[0].id,
		staffId: scene.nurse.personId,
		outsideReason: ''
	});
}

const weightAt = async (visitId: string) => {
	const [rows = []] = await db.sql(
		`select m.id, m.key from app.visit v join app.planned_measure pm on pm.planned_visit_id = v.planned_visit_id
		join app.measure m on m.id = pm.measure_id where v.id = '${visitId}'`
	);
	return new Map((rows as { id: string; key: string }[]).map((row) => [row.key, row.id]));
};

/** Carries a visit out with weight alone and a reason for everything else. */
async function carryOut(subjectId: string, key: string, weight: number) {
	const visit = by(await visitsOf(subjectId))[key] as Row;
	const { version } = await startVisit(scene.nurse, scene.studyId, visit.id, visit.version);
	for (const [measure, id] of await weightAt(visit.id)) {
		if (measure === 'egfr') continue;
		await recordMeasurement(scene.nurse, scene.studyId, visit.id, id, null, {
			softAnswer: 'Measured again.',
			comment: '',
			reason: '',
			entry:
				measure === 'weight'
					? { kind: 'value', value: weight, unit: 'kg' }
					: { kind: 'not done', reason: 'Subject declined' }
		});
	}
	await finishVisit(scene.nurse, scene.studyId, visit.id, version);
}

describe('an amendment', () => {
	test('is a draft from the newest version; a second waits for the first', async () => {
		const made = await Promise.allSettled(
			[1, 2, 3].map(() =>
				createAmendment(scene.manager, scene.studyId, { summary: 'Visits are fewer.' })
			)
		);
		expect(made.filter((each) => each.status === 'fulfilled')).toHaveLength(1);
		for (const each of made)
			if (each.status === 'rejected') expect(each.reason).toMatchObject({ code: 'CONFLICT' });
		await expect(
			createAmendment(scene.coordinator, scene.studyId, { summary: 'Not mine to write.' })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
	});

	test('says when it was approved, and whether people are asked again where nothing else says it', async () => {
		const draft = await draftAmendment(db, scene, another);
		const publish = (answers: Record<string, string>) =>
			publishProtocol(scene.manager, scene.studyId, draft.version, {
				approvedOn: '',
				reconsent: '',
				reconsentBy: '',
				...answers
			} as never);
		await expect(publish({})).rejects.toMatchObject({
			fields: { approvedOn: expect.any(String), reconsent: expect.any(String) }
		});
		await expect(publish({ approvedOn: '2026-03-11', reconsent: 'no' })).rejects.toMatchObject({
			fields: { approvedOn: 'This day has not come yet.' }
		});
		await publish({ approvedOn: '2026-03-01', reconsent: 'no' });
		const [rows] = await db.sql(
			`select number, approved_on::text, reconsent, summary is not null as said from app.protocol_version
			where study_id = '${scene.studyId}' order by number`
		);
		expect(rows?.at(-1)).toEqual({
			number: 2,
			approved_on: '2026-03-01',
			reconsent: false,
			said: true
		});
	});

	test('does not touch the ground that the allocation stands on', async () => {
		await expect(
			amend(
				db,
				scene,
				(definition) => ({
					...definition,
					arms: definition.arms.map((arm, at) => ({ ...arm, ratio: at + 1 }))
				}),
				{ reconsent: 'no' }
			)
		).rejects.toMatchObject({ code: 'DEFINITION' });
	});

	test('brings its sites, rooms and forms', async () => {
		await amend(
			db,
			scene,
			(definition) =>
				withForm('2.0')({
					...definition,
					sites: [
						...definition.sites.map((site, at) =>
							at === 0
								? { ...site, rooms: [...site.rooms, { key: 'annexe', name: 'Annexe' }] }
								: site
						),
						{
							...(definition.sites[0] as (typeof definition.sites)[number]),
							code: '03',
							name: 'Tarnbeck',
							zone: 'Asia/Tokyo'
						}
					]
				}),
			{}
		);
		const [sites, rooms, forms] = await db.sql(
			`select name from app.site where study_id = '${scene.studyId}' order by code`,
			`select count(*)::int as n from app.room where study_id = '${scene.studyId}' and name = 'Annexe'`,
			`select label, language from app.consent_version where study_id = '${scene.studyId}' order by label`
		);
		expect(sites?.map((site) => site.name)).toEqual(['Northmoor', 'Saltreach', 'Tarnbeck']);
		expect(rooms).toEqual([{ n: 1 }]);
		expect(forms?.map((form) => form.label)).toEqual(['1.0', '2.0']);
	});
});

describe('who follows which version', () => {
	test('R-40, R-54: people stay on theirs until they consent again; past visits never change', async () => {
		const subject = await inStudy();
		await carryOut(subject.id, 'baseline', 70);
		await book(subject.id, 'month-3', '2026-06-10');
		await book(subject.id, 'month-24', '2028-03-10');
		const before = by(await visitsOf(subject.id));
		await amend(db, scene, (of) => withForm('2.0')(another(of)));
		expect(by(await visitsOf(subject.id))).toEqual(before);

		const list = await findReconsents(scene.coordinator, scene.studyId);
		expect(list.tasks).toEqual([
			expect.objectContaining({
				number: subject.number,
				cause: 'amendment',
				due: '9 Apr 2026',
				overdue: false,
				refused: null
			})
		]);
		expect((await findReconsents(scene.other, scene.studyId)).tasks).toEqual([]);
		clock.set('2026-04-10T12:00:00Z');
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks[0]?.overdue).toBe(true);

		// The old form says nothing about the new version.
		const old = consentOn(scene, scene.coordinator, '2026-04-10');
		await expect(
			recordReconsent(scene.coordinator, scene.studyId, subject.id, old)
		).rejects.toMatchObject({ code: 'RULE', message: expect.stringContaining('version 2') });
		const [forms = []] = await db.sql(
			`select id from app.consent_version where study_id = '${scene.studyId}' and label = '2.0'`
		);
		const done = await recordReconsent(scene.coordinator, scene.studyId, subject.id, {
			...old,
			consentVersionId: forms[0].id
		});
		expect(done).toMatchObject({ follows: 2, visits: { made: 1, dropped: 1 } });
		const after = by(await visitsOf(subject.id));
		// Settled, and passed on the day of the move (week 2): as they were, by the version they were planned by.
		for (const key of ['baseline', 'week-2']) expect(after[key]).toEqual(before[key]);
		expect(after['week-6']).toMatchObject({
			status: 'planned',
			number: 2,
			target: '2026-04-21',
			earliest: '2026-04-18',
			latest: '2026-04-28'
		});
		// The same row, moved: the booking within its window is kept.
		expect(after['month-3']).toMatchObject({
			id: before['month-3']?.id,
			status: 'booked',
			number: 2,
			latest: '2026-07-01'
		});
		// Gone from the plan: not required, and its booking is cancelled.
		expect(after['month-24']).toMatchObject({ status: 'not required', number: 1 });
		const [appointments] = await db.sql(
			`select v.name, a.status from app.appointment a join app.visit v on v.id = a.visit_id where a.subject_id = '${subject.id}' order by v.name`
		);
		expect(appointments).toEqual([
			{ name: 'Month 24', status: 'cancelled' },
			{ name: 'Month 3', status: 'booked' }
		]);
		// Earlier is still earlier: everything to come stands after what was.
		const kept = Math.max(after.baseline?.position ?? 0, after['week-2']?.position ?? 0);
		for (const key of ['week-6', 'month-3', 'month-18'])
			expect(after[key]?.position).toBeGreaterThan(kept);
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks).toEqual([]);
		// The measures of what is to come are the new version's, those of what was are not.
		expect([...(await weightAt(after['month-3']?.id ?? '')).keys()]).toContain('waist');
		expect([...(await weightAt(after.baseline?.id ?? '')).keys()]).not.toContain('waist');
		const audited = await db.sql(
			`select before, after, reason from audit.event where record = 'subject' and record_id = '${subject.id}' and after ? 'protocol_version_id' and action = 'change'`
		);
		expect(audited[0]).toHaveLength(1);
	});

	test('a booking outside the moved window is kept and said to be moved', async () => {
		const subject = await inStudy();
		await book(subject.id, 'month-3', '2026-06-22');
		await amend(
			db,
			scene,
			(of) => ({
				...of,
				visits: of.visits.map((visit) =>
					visit.key === 'month-3' ? { ...visit, after: { amount: 7, unit: 'day' as const } } : visit
				)
			}),
			{ reconsent: 'no' }
		);
		const record = await getSubjectRecord(scene.coordinator, scene.studyId, subject.id);
		const visit = record.ahead.find((each) => each.name === 'Month 3');
		expect(visit).toMatchObject({ toMove: true, status: 'booked', latest: '2026-06-17' });
		expect(record.version).toMatchObject({ number: 2, newest: 2 });
	});

	test('with nobody to ask again, everybody in the study follows; who left does not', async () => {
		const [one, two] = [await inStudy(), await inStudy()];
		await recordExit(scene.coordinator, scene.studyId, two.id, {
			kind: 'stopped visits',
			happenedOn: '2026-03-10',
			reason: ''
		});
		const done = await amend(db, scene, another, { reconsent: 'no' });
		expect(done).toMatchObject({ followed: 1, jobRunId: null });
		expect(by(await visitsOf(one.id))['week-6']).toBeDefined();
		expect(by(await visitsOf(two.id))['week-6']).toBeUndefined();
	});

	test('many follow by a job that goes on where a broken one stopped', async () => {
		for (let n = 0; n < 22; n++)
			await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, { on: '2026-03-10' });
		const done = await amend(db, scene, another, { reconsent: 'no' });
		expect(done.followed).toBe(0);
		const versionOf = () =>
			db.sql(
				`select v.number, count(*)::int as n from app.subject s join app.protocol_version v on v.id = s.protocol_version_id
				where s.study_id = '${scene.studyId}' group by v.number order by v.number`
			);
		expect((await versionOf())[0]).toEqual([{ number: 1, n: 22 }]);
		await amendmentJob({
			payload: { studyId: scene.studyId, jobRunId: done.jobRunId as string },
			lastTry: true
		});
		expect((await versionOf())[0]).toEqual([{ number: 2, n: 22 }]);
		const [runs] = await db.sql(
			`select status, fraction from app.job_run where id = '${done.jobRunId}'`
		);
		expect(runs).toEqual([{ status: 'done', fraction: 1 }]);
	}, 60_000);

	test('whoever waits to be asked about version 2 does not slip into version 3', async () => {
		const subject = await inStudy();
		await amend(db, scene, (of) => withForm('2.0')(another(of)));
		const fresh = await amend(db, scene, (of) => ({ ...of, name: 'Weft, renamed' }), {
			reconsent: ''
		});
		expect(fresh.followed).toBe(0);
		const { tasks } = await findReconsents(scene.coordinator, scene.studyId);
		expect(tasks).toMatchObject([{ number: subject.number, cause: 'amendment' }]);
		expect(tasks[0]?.because).toContain('version 2');
		const refused = await refuseReconsent(scene.coordinator, scene.studyId, subject.id, {
			cause: 'amendment',
			refusedOn: '2026-03-10',
			reason: ''
		});
		expect(refused.version).toBe(1);
		expect((await findReconsents(scene.coordinator, scene.studyId)).tasks).toMatchObject([
			{ refused: '10 Mar 2026' }
		]);
		expect(
			(await getSubjectRecord(scene.coordinator, scene.studyId, subject.id)).version.number
		).toBe(1);
	});

	test('R-54: a new enrolment takes the newest version and a form of it', async () => {
		await amend(db, scene, withForm('2.0'));
		await expect(inStudy()).rejects.toMatchObject({
			code: 'CONSENT_NEEDED',
			message: expect.stringContaining('another protocol version')
		});
		const [forms = []] = await db.sql(
			`select id from app.consent_version where study_id = '${scene.studyId}' and label = '2.0'`
		);
		scene = { ...scene, consentVersionId: forms[0].id };
		const subject = await inStudy();
		const record = await getSubjectRecord(scene.coordinator, scene.studyId, subject.id);
		expect(record.version.number).toBe(2);
	});

	test('an enrolment and a publication at the same instant leave nobody behind', async () => {
		const draft = await draftAmendment(db, scene, another);
		const [publication, ...enrolments] = await Promise.all([
			publishProtocol(scene.manager, scene.studyId, draft.version, {
				approvedOn: '2026-03-01',
				reconsent: 'no',
				reconsentBy: ''
			}),
			...Array.from({ length: 4 }, () =>
				enrolOne(scene, scene.coordinator, scene.sites[0]?.id, { on: '2026-03-10' })
			)
		]);
		expect(publication.jobRunId).toBeNull();
		const [versions] = await db.sql(
			`select distinct v.number from app.subject s join app.protocol_version v on v.id = s.protocol_version_id where s.study_id = '${scene.studyId}'`
		);
		expect(versions).toEqual([{ number: 2 }]);
		expect(enrolments).toHaveLength(4);
	});

	test('a cut over subjects of two versions ties visits and measures by their keys', async () => {
		const first = await inStudy();
		await carryOut(first.id, 'baseline', 70);
		await amend(db, scene, (of) => withForm('2.0')(another(of)));
		const [forms = []] = await db.sql(
			`select id from app.consent_version where study_id = '${scene.studyId}' and label = '2.0'`
		);
		scene = { ...scene, consentVersionId: forms[0].id };
		const second = await inStudy();
		await carryOut(second.id, 'baseline', 81);
		await freezeCut(scene.manager, scene.studyId, { label: 'Two versions', cutOffAt: '' });
		const content = await read(scene.manager, 'cut.read', { studyId: scene.studyId }, (reader) =>
			snapshot(reader, scene.studyId, clock.now())
		);
		expect(content?.protocolVersion).toBe(2);
		expect(content?.measures.map((measure) => measure.key)).toContain('waist');
		const weights = content?.subjects.map((subject) => [
			subject.number,
			subject.visits.map((visit) => [visit.key, visit.values.weight?.value])
		]);
		expect(weights).toEqual(
			[
				[first.number, [['baseline', 70]]],
				[second.number, [['baseline', 81]]]
			].sort()
		);
	});
});
