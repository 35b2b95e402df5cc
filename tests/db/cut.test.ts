import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { freezeCut, remakeCut, takeOutCut } from '../../src/lib/domain/cut/cut.commands.server';
import { contentOf, findCuts } from '../../src/lib/domain/cut/cut.reads.server';
import type { CutContent } from '../../src/lib/domain/cut/content';
import { fingerprintNow } from '../../src/lib/domain/cut/fingerprint.server';
import { cutFlow } from '../../src/lib/domain/flow/cut-flow';
import { flowBreaks } from '../../src/lib/domain/flow/flow';
import { canonical } from '../../src/lib/domain/cut/canonical';
import {
	addScreening,
	closeScreening
} from '../../src/lib/domain/subject/screening.commands.server';
import { newId } from '../../src/lib/id';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import type { Actor } from '../../src/lib/server/actor';
import { read } from '../../src/lib/server/change';
import { forgetStorage } from '../../src/lib/server/storage/storage';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import {
	importFile,
	importScene,
	orthodontCsv,
	orthodontMapping,
	type ImportScene
} from '../support/analysis';
import { asOwner } from '../support/people';
import { enrolOne, makeList, makeScene, useAs } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	forgetStorage();
	end = useAs(db.appUrl);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});

const cutOf = (actor: Actor, studyId: string, id: string): Promise<CutContent> =>
	read(
		actor,
		'cut.read',
		{ studyId },
		async (reader) => (await contentOf(reader, studyId, id)).content
	);

/** Changes as the application makes them: with an actor, by the triggers' rules. */
const changing = (...statements: string[]) =>
	asOwner(db, async (client) => {
		await client.query(`select set_config('heddle.reason', 'a test changes it', true)`);
		for (const statement of statements) await client.query(statement);
	});

describe('a data cut', () => {
	let scene: ImportScene;
	let statistician: Actor;
	let first: Awaited<ReturnType<typeof freezeCut>>;
	beforeAll(async () => {
		scene = await importScene(db);
		statistician = await scene.person('statistician');
		await importFile(scene, orthodontCsv(), orthodontMapping);
		first = await freezeCut(statistician, scene.studyId, { label: 'Before', cutOffAt: '' });
	});

	test('holds the study as it stands, with its counts and its fingerprint', async () => {
		expect(first).toMatchObject({ number: 1, subjects: 27, measurements: 108 });
		const content = await cutOf(statistician, scene.studyId, first.id);
		expect(content.subjects[0]).toMatchObject({
			importedAs: 'M01',
			site: '01',
			characteristics: { sex: 'boy' }
		});
		expect(content.subjects[0]?.visits.map((visit) => visit.values.distance?.value)).toEqual([
			26, 25, 29, 31
		]);
		const { text } = await takeOutCut(statistician, scene.studyId, first.id, 'json');
		expect(fingerprintNow(text)).toBe(first.fingerprint);
		const [taken] = await db.sql(
			`select actor, action, after from audit.event where record = 'cut' and action = 'act' and record_id = '${first.id}'`
		);
		expect(taken).toEqual([
			{ actor: statistician.personId, action: 'act', after: { taken: 'json' } }
		]);
	});

	test('R-73: live data change, and the cut made again from them has the same fingerprint and the same tables', async () => {
		const before = await cutOf(statistician, scene.studyId, first.id);
		await changing(
			`update app.measurement set value = 99 where study_id = '${scene.studyId}' and value = 26`,
			`update app.measurement set value = 98 where study_id = '${scene.studyId}' and value = 99`,
			`update app.measurement set value = null, not_done_reason = 'Not done' where study_id = '${scene.studyId}' and value = 25`,
			`update app.subject set characteristics = '{"sex": "girl"}' where study_id = '${scene.studyId}' and imported_as = 'M02'`,
			`update app.visit set name = 'Renamed', status = 'missed', missed_reason = 'x' where study_id = '${scene.studyId}' and study_time = 6`,
			`update app.site set name = 'Elsewhere' where study_id = '${scene.studyId}'`
		);
		await importFile(scene, 'subject,visit,time,sex,distance\nNEW,1,0,boy,20\n', orthodontMapping);
		const again = await remakeCut(statistician, scene.studyId, first.id);
		expect(again).toMatchObject({ same: true, again: first.fingerprint });
		expect(await cutOf(statistician, scene.studyId, first.id)).toEqual(before);
		const later = await freezeCut(statistician, scene.studyId, { label: 'After', cutOffAt: '' });
		expect(later.number).toBe(2);
		expect(later.subjects).toBe(28);
		expect(later.fingerprint).not.toBe(first.fingerprint);
		expect(
			(await cutOf(statistician, scene.studyId, later.id)).subjects[0]?.visits[0]
		).toMatchObject({ values: { distance: { value: 98 } } });
	});

	test('made late for an earlier instant, it takes the values of that instant', async () => {
		const [, newestButOne] = await findCuts(statistician, scene.studyId);
		const cutOffAt = newestButOne?.cutOffAt as string;
		expect(newestButOne?.number).toBe(1);
		const late = await freezeCut(statistician, scene.studyId, { label: 'Late', cutOffAt });
		expect(late.fingerprint).toBe(first.fingerprint);
	});

	test('is refused for the future, for nothing, and to who may not', async () => {
		const freeze = (cutOffAt: string) =>
			freezeCut(statistician, scene.studyId, { label: 'x', cutOffAt });
		await expect(freeze('2199-01-01T00:00')).rejects.toMatchObject({ code: 'FUTURE' });
		await expect(freeze('2001-01-01T00:00')).rejects.toMatchObject({ code: 'EMPTY_CUT' });
		const board = await scene.person('board_member');
		await expect(
			freezeCut(board, scene.studyId, { label: 'x', cutOffAt: '' })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		await expect(takeOutCut(board, scene.studyId, first.id, 'csv')).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
	});

	test('cannot be altered, and belongs to its study alone', async () => {
		const other = await importScene(db);
		await expect(
			remakeCut(await other.person('statistician'), other.studyId, first.id)
		).rejects.toMatchObject({ code: 'NOT_FOUND' });
		await expect(
			asOwner(db, async (client) => {
				await client.query('set local role heddle_app');
				await client.query(`update app.cut set label = 'x' where id = '${first.id}'`);
			})
		).rejects.toThrow(/permission denied/);
	});
});

describe('the cut of a masked trial', () => {
	test('holds no allocation and no kit; the allocation is frozen apart, with a hash of its own', async () => {
		const scene = await makeScene(db);
		await makeList(db, scene);
		const subject = await enrolOne(scene);
		const again = useAs(db.appUrl);
		const { kitNumber } = await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		await asOwner(db, async (client) => {
			await client.query(
				`update app.visit set status = 'completed', happened_on = '2026-03-02' where study_id = $1 and position = 1`,
				[scene.studyId]
			);
			await client.query(
				`insert into app.measurement (id, study_id, site_id, subject_id, visit_id, measure_id, value, unit, taken_by, source)
				select gen_random_uuid(), v.study_id, v.site_id, v.subject_id, v.id, m.id, 80, m.unit, $2, 'form'
				from app.visit v join app.measure m on m.study_id = v.study_id and m.key = 'weight' where v.study_id = $1 and v.position = 1`,
				[scene.studyId, scene.nurse.personId]
			);
		});
		const cut = await freezeCut(scene.manager, scene.studyId, { label: 'First', cutOffAt: '' });
		const { text } = await takeOutCut(scene.manager, scene.studyId, cut.id, 'json');
		const [[frozen], arms] = (await db.sql(
			`select content, hash from closed.cut_allocation where cut_id = '${cut.id}'`,
			`select arm_key from closed.list_position where subject_id = '${subject.id}'`
		)) as [[{ content: Record<string, string>; hash: string }], [{ arm_key: string }]];
		expect(frozen.content).toEqual({ [subject.id]: arms[0].arm_key });
		expect(frozen.hash).toMatch(/^[0-9a-f]{64}$/);
		expect(text).toContain(subject.number);
		expect(text).not.toContain(`"${arms[0].arm_key}"`);
		expect(text).not.toContain(kitNumber);
		expect(text.toLowerCase()).not.toContain('kit');
		await again();
	});

	test('counts the screening log as it stood, and is made again the same when people were screened since', async () => {
		const scene = await makeScene(db);
		const screened = async (reason: string | null) => {
			const { id } = await addScreening(scene.coordinator, scene.studyId, {
				siteId: scene.sites[0]?.id as string,
				screenedOn: '2026-03-02' as never
			});
			if (reason !== null) await closeScreening(scene.coordinator, scene.studyId, id, reason, 1);
			return id;
		};
		const subject = await enrolOne(scene);
		await screened('Declined');
		await screened('Declined');
		const open = await screened(null);
		await asOwner(db, async (client) => {
			await client.query(
				`insert into app.measurement (id, study_id, site_id, subject_id, visit_id, measure_id, value, unit, taken_by, source)
				select gen_random_uuid(), v.study_id, v.site_id, v.subject_id, v.id, m.id, 80, m.unit, $2, 'form'
				from app.visit v join app.measure m on m.study_id = v.study_id and m.key = 'weight' where v.study_id = $1 and v.position = 1`,
				[scene.studyId, scene.nurse.personId]
			);
		});
		const statistician = await scene.person('statistician');
		const cut = await freezeCut(statistician, scene.studyId, { label: 'First', cutOffAt: '' });
		const content = await cutOf(statistician, scene.studyId, cut.id);
		expect(content).toMatchObject({
			format: 'heddle.cut/2',
			randomises: true,
			screening: [
				{ outcome: 'entered', reason: null, n: 1 },
				{ outcome: 'in progress', reason: null, n: 1 },
				{ outcome: 'not entered', reason: 'Declined', n: 2 }
			],
			subjects: [{ number: subject.number, screened: true }]
		});
		const held = cutFlow(content, null);
		expect(held?.flow).toMatchObject({ assessed: 4, inScreening: 1, enrolled: 1 });
		expect(flowBreaks(held?.flow as never)).toEqual([]);

		await closeScreening(scene.coordinator, scene.studyId, open, 'Moved away', 1);
		await enrolOne(scene);
		await screened(null);
		expect(await remakeCut(statistician, scene.studyId, cut.id)).toMatchObject({ same: true });
		const later = await freezeCut(statistician, scene.studyId, { label: 'Later', cutOffAt: '' });
		expect((await cutOf(statistician, scene.studyId, later.id)).screening).toEqual([
			{ outcome: 'entered', reason: null, n: 2 },
			{ outcome: 'in progress', reason: null, n: 1 },
			{ outcome: 'not entered', reason: 'Declined', n: 2 },
			{ outcome: 'not entered', reason: 'Moved away', n: 1 }
		]);
	});

	test('of the first format is made again in the first format, and no flow is read out of it', async () => {
		const scene = await importScene(db);
		const statistician = await scene.person('statistician');
		await importFile(scene, orthodontCsv(), orthodontMapping);
		const now = await freezeCut(statistician, scene.studyId, { label: 'Now', cutOffAt: '' });
		const content = await cutOf(statistician, scene.studyId, now.id);
		const {
			screening: _screening,
			primaryMeasure: _primary,
			randomises: _randomises,
			enrolmentPlan: _plan,
			...rest
		} = content;
		const text = canonical({
			...rest,
			format: 'heddle.cut/1',
			subjects: content.subjects.map(({ screened: _, ...subject }) => subject)
		} as never);
		const id = newId();
		await asOwner(db, (client) =>
			client.query(
				`insert into app.cut (id, study_id, number, label, cut_off_at, extracted_at, made_by, subjects, measurements, fingerprint, content)
				select $2, study_id, 99, 'Of old', cut_off_at, extracted_at, made_by, subjects, measurements, $3, $4 from app.cut where id = $1`,
				[now.id, id, fingerprintNow(text), text]
			)
		);
		expect(await remakeCut(statistician, scene.studyId, id)).toMatchObject({ same: true });
		expect(cutFlow(await cutOf(statistician, scene.studyId, id), null)).toBeNull();
	});
});
