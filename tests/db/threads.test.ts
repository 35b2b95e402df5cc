import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { findThreads, getThreadFrame } from '../../src/lib/domain/subject/threads.reads.server';
import { newId } from '../../src/lib/id';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
const everything = { sort: 'number', order: 'up', limit: 100 } as const;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	end = useAs(db.appUrl);
	clock.set('2026-03-10T12:00:00Z');
	scene = await makeScene(db);
	await makeList(db, scene);
	end = useAs(db.appUrl);
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

describe('threads', () => {
	test('count from randomisation where there is one, by days, up to today at the site', async () => {
		const subject = await enrolOne(scene);
		await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		clock.set('2026-03-20T12:00:00Z');
		const { items } = await findThreads(scene.coordinator, scene.studyId, everything);
		clock.set('2026-03-10T12:00:00Z');
		const [row] = items;
		expect(row).toMatchObject({ number: subject.number, today: 10, exit: null });
		// Enrolled eight days before it was randomised.
		expect(row?.visits[0]).toMatchObject({ name: 'Baseline', earliest: -8, latest: -1 });
		expect(row?.visits[1]).toMatchObject({ name: 'Week 2', earliest: 11, target: 14, latest: 17 });
		const frame = await getThreadFrame(scene.coordinator, scene.studyId, {});
		expect(frame).toMatchObject({ total: 1, perUnit: 1, axis: 'days since randomisation' });
		expect(frame.columns.map((column) => column.name)).toHaveLength(9);
		expect(frame.from).toBeLessThan(-8);
		expect(frame.to).toBeGreaterThan(730 + 28);
	});

	test('of another site are not among one’s own, also when asked for by name', async () => {
		const there = await enrolOne(scene, scene.other, scene.sites[1]?.id);
		for (const search of [undefined, there.number, '%']) {
			const { items } = await findThreads(scene.coordinator, scene.studyId, {
				...everything,
				...(search ? { search } : {})
			});
			expect(items.some((row) => row.id === there.id)).toBe(false);
		}
		const mine = await findThreads(scene.other, scene.studyId, {
			...everything,
			search: there.number.slice(3)
		});
		expect(mine.items.map((row) => row.id)).toEqual([there.id]);
	});

	test('that have no calendar stand by their study time', async () => {
		const cohort = await makeScene(db, { template: 'single-arm-cohort', masked: false });
		const subject = newId();
		await asOwner(db, async (client) => {
			await client.query(
				`insert into app.subject (id, study_id, site_id, protocol_version_id, number, imported_as, enrolled_on)
				select $1, $2, $3, id, 'F01', 'F01', '2026-03-01' from app.protocol_version where study_id = $2`,
				[subject, cohort.studyId, cohort.sites[0]?.id]
			);
			for (const [at, years] of [8, 10, 12, 14].entries())
				await client.query(
					`insert into app.visit (id, study_id, site_id, subject_id, name, position, status, study_time)
					values ($1, $2, $3, $4, $5, $6, 'completed', $7)`,
					[newId(), cohort.studyId, cohort.sites[0]?.id, subject, `Age ${years}`, at + 1, years]
				);
		});
		const frame = await getThreadFrame(cohort.coordinator, cohort.studyId, {});
		expect(frame).toMatchObject({ axis: 'study time in years', perUnit: 365.25 });
		expect(frame.columns.map((column) => column.at / 365.25)).toEqual([8, 10, 12, 14]);
		const { items } = await findThreads(cohort.coordinator, cohort.studyId, everything);
		expect(items[0]).toMatchObject({ number: 'F01', today: null });
		expect(items[0]?.visits.map((visit) => visit.took)).toEqual(
			[8, 10, 12, 14].map((years) => years * 365.25)
		);
	});
});

describe('a subject’s record', () => {
	test('is in the order of time, and contact details are for those who may read them', async () => {
		const subject = await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
			contact: { name: 'Ada Reed', email: 'ada@example.org', phone: '', language: 'en' }
		});
		await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		const record = await getSubjectRecord(scene.coordinator, scene.studyId, subject.id);
		expect(record.items.map((item) => item.kind)).toEqual([
			'screening',
			'consent',
			'enrolment',
			'randomisation'
		]);
		expect(record.contact).toMatchObject({ name: 'Ada Reed' });
		expect(record.ahead.map((visit) => visit.name)).toHaveLength(9);
		const nurse = await getSubjectRecord(scene.nurse, scene.studyId, subject.id);
		expect(nurse.contact).toBeNull();
		expect(JSON.stringify(nurse)).not.toMatch(/Ada|ada@/);
		await expect(getSubjectRecord(scene.other, scene.studyId, subject.id)).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
	});
});
