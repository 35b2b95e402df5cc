import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	askForList,
	makeAllocationList
} from '../../src/lib/domain/randomisation/allocation.commands.server';
import { hashOfList } from '../../src/lib/domain/randomisation/list.server';
import { readKitNumber } from '../../src/lib/domain/randomisation/kit';
import { stratumKey } from '../../src/lib/domain/randomisation/strata';
import { recordExit } from '../../src/lib/domain/subject/exit.commands.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { newId } from '../../src/lib/id';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';
import pg from 'pg';

let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set('2026-03-10T12:00:00Z');
	scene = await makeScene(db, { plannedSubjects: 60 });
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

/** Bare subjects with a consent, in one stratum: setting the scene for a race. */
async function addSubjects(count: number, siteAt = 0): Promise<string[]> {
	const ids = Array.from({ length: count }, () => newId());
	const site = scene.sites[siteAt] as { id: string; code: string };
	await asOwner(db, async (client) => {
		const [version] = (
			await client.query(`select id from app.protocol_version where study_id = $1`, [scene.studyId])
		).rows;
		for (const [at, id] of ids.entries()) {
			await client.query(
				`insert into app.subject (id, study_id, site_id, protocol_version_id, number, enrolled_on, stratum)
				values ($1, $2, $3, $4, $5, '2026-03-02', $6)`,
				[
					id,
					scene.studyId,
					site.id,
					version.id,
					`race-${site.code}-${at}`,
					JSON.stringify({ 'kidney-function': 'from-45', site: site.code })
				]
			);
			const screening = newId();
			await client.query(
				`insert into app.screening (id, study_id, site_id, number, screened_on, outcome, subject_id)
				values ($1, $2, $3, $4, '2026-03-02', 'entered', $5)`,
				[screening, scene.studyId, site.id, 1000 + at, id]
			);
			await client.query(
				`insert into app.consent (id, study_id, site_id, screening_id, subject_id, consent_version_id, signed_at, signed_by, explained_by, copy_given)
				values ($1, $2, $3, $4, $5, $6, '2026-03-02T10:00:00Z', 'participant', $7, true)`,
				[
					newId(),
					scene.studyId,
					site.id,
					screening,
					id,
					scene.consentVersionId,
					scene.coordinator.personId
				]
			);
		}
	});
	return ids;
}

describe('the allocation list', () => {
	test('nobody is randomised before there is one', async () => {
		const subject = await enrolOne(scene);
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, subject.id)
		).rejects.toMatchObject({ code: 'ALLOCATION_UNAVAILABLE' });
	});

	test('is for the independent statistician to ask for', async () => {
		for (const actor of [scene.manager, scene.coordinator, scene.investigator])
			await expect(askForList(actor, scene.studyId)).rejects.toMatchObject({
				code: 'NOT_PERMITTED'
			});
	});

	test('R-45: is made once by the look worker, with method, hash and count on record; a second time is refused', async () => {
		const jobRunId = await makeList(db, scene);
		end = useAs(db.appUrl);
		const [[record] = [], positions, letters, [job] = []] = await db.sql(
			`select method, hash, count, asked_by from app.allocation_record where study_id = '${scene.studyId}'`,
			`select stratum, position, arm_key, kit_number from closed.list_position where study_id = '${scene.studyId}'`,
			`select arm_key, letter from closed.arm_letter where study_id = '${scene.studyId}' order by letter`,
			`select status, result, message, error from app.job_run where id = '${jobRunId}'`
		);
		// 2 levels × 2 sites, all 60 planned subjects in each.
		expect(record?.count).toBe(240);
		expect(positions).toHaveLength(240);
		expect(record?.asked_by).toBe(scene.independent.personId);
		expect(record?.hash).toMatch(/^[0-9a-f]{64}$/);
		expect(new Set(positions?.map((each) => each.kit_number)).size).toBe(240);
		expect(positions?.every((each) => readKitNumber(each.kit_number).ok)).toBe(true);
		expect(letters?.map((each) => each.letter)).toEqual(['A', 'B']);
		expect(job).toEqual({ status: 'done', result: null, message: 'Done.', error: null });

		await expect(askForList(scene.independent, scene.studyId)).rejects.toMatchObject({
			code: 'LIST_EXISTS'
		});
		const again = newId();
		await asOwner(db, (client) =>
			client.query(
				`insert into app.job_run (id, queue, title, study_id, requested_by) values ($1, 'allocation-list', 'Allocation list', $2, $3)`,
				[again, scene.studyId, scene.independent.personId]
			)
		);
		await end();
		const endLook = useAs(db.unmaskedUrl);
		await expect(
			makeAllocationList({
				payload: { studyId: scene.studyId, askedBy: scene.independent.personId, jobRunId: again },
				lastTry: true
			})
		).rejects.toMatchObject({ code: 'LIST_EXISTS' });
		await endLook();
		end = useAs(db.appUrl);
		const [[count]] = (await db.sql(
			`select count(*)::int as n from closed.list_position where study_id = '${scene.studyId}'`
		)) as [{ n: number }[]];
		expect(count?.n).toBe(240);
	});

	test('follows from its recorded seed and sizes, and each stratum is balanced block by block', async () => {
		const [[list] = [], positions] = await db.sql(
			`select seed, block_sizes, hash from closed.allocation_list where study_id = '${scene.studyId}'`,
			`select stratum, position, arm_key as arm, kit_number as kit from closed.list_position
				where study_id = '${scene.studyId}' order by position`
		);
		const { makeList: remake } = await import('../../src/lib/domain/randomisation/list.server');
		const strata = [...new Set(positions?.map((each) => stratumKey(each.stratum)))];
		const again = remake({
			arms: [
				{ key: 'a', ratio: 1 },
				{ key: 'b', ratio: 1 }
			],
			strata,
			blockSizes: list?.block_sizes,
			perStratum: 60,
			seed: list?.seed
		}).entries.filter((entry) => entry.position <= 60);
		expect(hashOfList(again)).toBe(list?.hash);
		for (const stratum of strata) {
			const stored = positions
				?.filter((each) => stratumKey(each.stratum) === stratum)
				.map(({ position, arm, kit }) => ({ position, arm, kit }));
			const expected = again
				.filter((each) => each.stratum === stratum)
				.map(({ position, arm, kit }) => ({ position, arm, kit }));
			expect(stored).toEqual(expected);
		}
	});

	test('R-41: the application’s role cannot read one row of the closed tables', async () => {
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		try {
			for (const table of [
				'allocation_list',
				'list_position',
				'arm_letter',
				'cut_allocation',
				'look_request',
				'look_result',
				'closed_report',
				'released_copy',
				'event'
			])
				await expect(client.query(`select * from closed.${table} limit 1`)).rejects.toMatchObject({
					code: '42501'
				});
		} finally {
			await client.end();
		}
	});

	test('neither seed, sizes of blocks, arms of kits nor unused kits stand anywhere in the open tables', async () => {
		const [[list] = [], unused, tables] = await db.sql(
			`select seed, block_sizes from closed.allocation_list where study_id = '${scene.studyId}'`,
			`select kit_number from closed.list_position where study_id = '${scene.studyId}' and subject_id is null`,
			`select table_schema as s, table_name as t from information_schema.tables
				where table_schema in ('app', 'audit', 'queue') and table_type = 'BASE TABLE'`
		);
		const everything: string[] = [];
		for (const { s, t } of tables ?? []) {
			const [rows] = await db.sql(`select r::text as line from "${s}"."${t}" r`);
			everything.push(...(rows ?? []).map((row) => String(row.line)));
		}
		const text = everything.join('\n');
		expect(text).toContain('allocation_record');
		expect(text).not.toContain(list?.seed);
		expect(text).not.toContain(`{${(list?.block_sizes as number[]).join(',')}}`);
		expect(text).not.toMatch(/block.?size/i);
		expect(unused?.some((each) => text.includes(each.kit_number))).toBe(false);
	});
});

describe('randomising', () => {
	test('gives a kit number once, plans the visits counted from it, and leaves the arm out of the open trail', async () => {
		const subject = await enrolOne(scene);
		const [first, second] = await Promise.allSettled([
			randomiseSubject(scene.coordinator, scene.studyId, subject.id),
			randomiseSubject(scene.coordinator, scene.studyId, subject.id)
		]);
		const outcomes = [first, second].map((each) => each?.status).sort();
		expect(outcomes).toEqual(['fulfilled', 'rejected']);
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, subject.id)
		).rejects.toMatchObject({ code: 'ALREADY_RANDOMISED' });
		const [[row] = [], visits, used, events] = await db.sql(
			`select kit_number, randomised_on::text from app.subject where id = '${subject.id}'`,
			`select name, target::text from app.visit where subject_id = '${subject.id}' order by position`,
			`select position from closed.list_position where subject_id = '${subject.id}'`,
			`select record, before, after from audit.event where subject_id = '${subject.id}' and record = 'list_position'`
		);
		expect(readKitNumber(row?.kit_number).ok).toBe(true);
		expect(row?.randomised_on).toBe('2026-03-10');
		expect(used).toHaveLength(1);
		expect(visits).toHaveLength(9);
		expect(visits?.[1]).toEqual({ name: 'Week 2', target: '2026-03-24' });
		expect(visits?.[8]).toEqual({ name: 'Month 24', target: '2028-03-10' });
		expect(events).toEqual([{ record: 'list_position', before: null, after: null }]);
	});

	test('needs a consent, a role at the site and a subject who has not left', async () => {
		const [bare] = await addSubjects(1);
		await asOwner(db, (client) =>
			client.query(`update app.consent set signed_at = '2027-01-01' where subject_id = $1`, [bare])
		);
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, bare as string)
		).rejects.toMatchObject({ code: 'CONSENT_NEEDED' });
		const subject = await enrolOne(scene);
		await expect(randomiseSubject(scene.nurse, scene.studyId, subject.id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		await expect(randomiseSubject(scene.other, scene.studyId, subject.id)).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
		await recordExit(scene.coordinator, scene.studyId, subject.id, {
			kind: 'intervention discontinued',
			happenedOn: '2026-03-10',
			reason: ''
		});
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, subject.id)
		).rejects.toMatchObject({ code: 'LEFT_STUDY' });
		// The closed side refuses by itself, also when somebody calls it past the command.
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		await client.query('begin');
		await client.query(`select app.enter($1, 'coordinator', 'test', '', null)`, [
			scene.coordinator.personId
		]);
		await expect(client.query('select closed.allocate($1)', [subject.id])).rejects.toMatchObject({
			message: 'LEFT_STUDY'
		});
		await client.end();
	});

	test('R-48: an exhausted stratum and a list that is not there get the same answer, and nothing changes', async () => {
		const bare = await makeScene(db, { plannedSubjects: 4 });
		const alone = await enrolOne(bare);
		const missing = await randomiseSubject(bare.coordinator, bare.studyId, alone.id).catch(
			(error: Error) => error.message
		);
		await makeList(db, bare);
		end = useAs(db.appUrl);
		await randomiseSubject(bare.coordinator, bare.studyId, alone.id);
		for (let n = 0; n < 3; n++)
			await randomiseSubject(bare.coordinator, bare.studyId, (await enrolOne(bare)).id);
		const next = await enrolOne(bare);
		const exhausted = await randomiseSubject(bare.coordinator, bare.studyId, next.id).catch(
			(error: Error) => error.message
		);
		expect(exhausted).toBe(missing);
		expect(exhausted).not.toMatch(/arm|block|stratum|list/i);
		const [[row]] = (await db.sql(
			`select kit_number, version from app.subject where id = '${next.id}'`
		)) as [{ kit_number: string | null; version: number }[]];
		expect(row).toEqual({ kit_number: null, version: 1 });
	});

	test('R-47: 200 calls at once use positions 1 to n once each, in every stratum, with none skipped', async () => {
		const race = await makeScene(db, { plannedSubjects: 200 });
		scene = race;
		await makeList(db, race);
		end = useAs(db.appUrl);
		const north = await addSubjects(120, 0);
		const salt = await addSubjects(80, 1);
		const calls = [
			...north.map((id) => [race.coordinator, id] as const),
			...salt.map((id) => [race.other, id] as const)
		].sort((a, b) => (a[1].slice(-4) < b[1].slice(-4) ? -1 : 1));
		const kits = await Promise.all(
			calls.map(([actor, id]) => randomiseSubject(actor, race.studyId, id))
		);
		expect(new Set(kits.map((each) => each.kitNumber)).size).toBe(200);
		const [used] = await db.sql(
			`select stratum ->> 'site' as site, array_agg(position order by position) as places, count(distinct subject_id)::int as subjects
				from closed.list_position where study_id = '${race.studyId}' and subject_id is not null group by 1 order by 1`
		);
		const upTo = (n: number) => Array.from({ length: n }, (_, at) => at + 1);
		expect(used).toEqual([
			{ site: '01', places: upTo(120), subjects: 120 },
			{ site: '02', places: upTo(80), subjects: 80 }
		]);
	});
});
