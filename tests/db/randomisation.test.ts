import { spawnSync } from 'node:child_process';
import { mkdtempSync, readFileSync, statSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import pg from 'pg';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { askForList } from '../../src/lib/domain/randomisation/allocation.commands.server';
import { keptList, reproduce } from '../../src/lib/domain/randomisation/reproduce.server';
import { correctStratum } from '../../src/lib/domain/randomisation/stratum.commands.server';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { hashPassword } from '../../src/lib/server/auth/password';
import { clock } from '../../src/lib/time/clock';
import { addBareSubjects, sceneOf, unmaskedList } from '../support/allocation-scene';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';

const password = 'linen warp and weft';
let db: FreshDatabase;
let end: () => Promise<void>;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set('2026-03-10T12:00:00Z');
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

/** Makes the list as the look worker, and speaks as the web server again. */
async function listFor(scene: Scene, chance?: number): Promise<void> {
	await end();
	end = useAs(db.appUrl);
	await makeList(db, scene, chance);
	end = useAs(db.appUrl);
}

describe('minimisation', () => {
	let scene: Scene;
	beforeAll(async () => {
		scene = await sceneOf(db, {
			plannedSubjects: 80,
			allocation: { method: 'minimisation' },
			arms: [
				{ key: 'a', name: 'Treatment A', ratio: 2 },
				{ key: 'b', name: 'Treatment B', ratio: 1 }
			]
		});
	});

	test('its chance is the independent statistician’s to choose, and stands on the closed side alone', async () => {
		await expect(
			askForList(scene.manager, scene.studyId, { bestChance: 0.7 })
		).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		await listFor(scene, 0.73);
		const [[choice] = [], [made] = [], [record] = [], jobs] = await db.sql(
			`select best_chance from closed.minimisation_choice where study_id = '${scene.studyId}'`,
			`select best_chance, arms from closed.minimisation where study_id = '${scene.studyId}'`,
			`select method, count from app.allocation_record where study_id = '${scene.studyId}'`,
			`select data::text as data from queue.job where name = 'allocation-list'`
		);
		expect(choice?.best_chance).toBe(0.73);
		expect(made?.best_chance).toBe(0.73);
		// Half as many again as are planned.
		expect(record?.count).toBe(120);
		expect(record?.method).toMatch(/^minimisation\/1/);
		expect(JSON.stringify(jobs)).not.toContain('0.73');
		const [events] = await db.sql(
			`select coalesce(before::text, '') || coalesce(after::text, '') as said from audit.event where study_id = '${scene.studyId}'`
		);
		expect(events?.some((row) => row.said.includes('0.73'))).toBe(false);
		const blocks = await makeScene(db, { plannedSubjects: 10 });
		await expect(
			askForList(blocks.independent, blocks.studyId, { bestChance: 0.7 })
		).rejects.toMatchObject({ code: 'INVALID' });
	});

	test('50 at the same instant take the numbers 1 to 50 once each, and every one gets the arm the method gives', async () => {
		const subjects = await addBareSubjects(db, scene, 50, (n) => ({
			site: n % 3 ? 0 : 1,
			stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' }
		}));
		const kits = await Promise.all(
			subjects.map(({ id, siteAt }) =>
				randomiseSubject(siteAt === 0 ? scene.coordinator : scene.other, scene.studyId, id)
			)
		);
		expect(new Set(kits.map((each) => each.kitNumber)).size).toBe(50);
		const [used, places] = await db.sql(
			`select position, subject_id, arm_key, levels from closed.chance where study_id = '${scene.studyId}' and subject_id is not null order by position`,
			`select l.subject_id, l.arm_key, l.kit_number, s.kit_number as given from closed.list_position l join app.subject s on s.id = l.subject_id
				where l.study_id = '${scene.studyId}'`
		);
		expect(used?.map((row) => row.position)).toEqual(Array.from({ length: 50 }, (_, at) => at + 1));
		expect(new Set(used?.map((row) => row.subject_id)).size).toBe(50);
		const armOf = new Map(places?.map((row) => [row.subject_id, row.arm_key]));
		for (const row of used ?? []) expect(armOf.get(row.subject_id)).toBe(row.arm_key);
		for (const row of places ?? []) expect(row.given).toBe(row.kit_number);
		// The same row of allocations again, by the program beside the database's function.
		const kept = keptList.parse(await unmaskedList(db, scene));
		expect(reproduce(kept)).toMatchObject({ hash: kept.hash, differences: [] });
		expect(kept.chances.filter((each) => each.arm)).toHaveLength(50);
	});

	test('a subject gone back on half-way leaves no number used', async () => {
		const [one] = await addBareSubjects(db, scene, 1, () => ({ site: 0 }));
		const client = new pg.Client({ connectionString: db.appUrl });
		client.on('error', () => {});
		await client.connect();
		await client.query('begin');
		await client.query(`select app.enter($1, 'coordinator', 'test', '', $2)`, [
			scene.coordinator.personId,
			clock.now().toISOString()
		]);
		const [{ pid }] = (await client.query('select pg_backend_pid() as pid')).rows;
		await client.query('select closed.allocate($1)', [one!.id]);
		// Its server process is gone in the middle: as when the program or the machine dies.
		await db.sql(`select pg_terminate_backend(${pid})`);
		await client.end().catch(() => {});
		const [[before]] = (await db.sql(
			`select count(*)::int as n from closed.chance where study_id = '${scene.studyId}' and subject_id is not null`
		)) as [{ n: number }[]];
		expect(before?.n).toBe(50);
		await randomiseSubject(scene.coordinator, scene.studyId, one!.id);
		const [[after]] = (await db.sql(
			`select max(position) as n from closed.chance where study_id = '${scene.studyId}' and subject_id is not null`
		)) as [{ n: number }[]];
		expect(after?.n).toBe(51);
	});

	test('R-48: when the numbers are used up, the refusal is the neutral one and nothing changes', async () => {
		const small = await sceneOf(db, {
			plannedSubjects: 2,
			allocation: { method: 'minimisation' }
		});
		await listFor(small);
		const subjects = await addBareSubjects(db, small, 4, () => ({ site: 0 }));
		for (const { id } of subjects.slice(0, 3))
			await randomiseSubject(small.coordinator, small.studyId, id);
		const last = subjects[3]!.id;
		await expect(randomiseSubject(small.coordinator, small.studyId, last)).rejects.toMatchObject({
			code: 'ALLOCATION_UNAVAILABLE',
			message:
				'No allocation can be given at the moment. Nothing was changed. Tell the study office.'
		});
		const [[row]] = (await db.sql(
			`select kit_number, version from app.subject where id = '${last}'`
		)) as [{ kit_number: string | null; version: number }[]];
		expect(row).toEqual({ kit_number: null, version: 1 });
	});
});

describe('a stratum found wrong later', () => {
	test('R-46: is corrected as data with a reason; the allocation and its place stay, and a deviation says so', async () => {
		const scene = await makeScene(db, { plannedSubjects: 20 });
		await listFor(scene);
		const subject = await enrolOne(scene);
		const correction = {
			stratum: { 'kidney-function': 'from-45' },
			reason: 'Read from another report.'
		};
		const version = async () =>
			(await db.sql(`select version from app.subject where id = '${subject.id}'`))[0]?.[0]
				.version as number;
		await expect(
			correctStratum(scene.nurse, scene.studyId, subject.id, correction, 1)
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		await expect(
			correctStratum(scene.other, scene.studyId, subject.id, correction, 1)
		).rejects.toMatchObject({ code: 'NOT_FOUND' });
		await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		const place = async () =>
			(
				await db.sql(
					`select stratum, position, arm_key, kit_number from closed.list_position where subject_id = '${subject.id}'`
				)
			)[0];
		const before = await place();
		await expect(
			correctStratum(scene.coordinator, scene.studyId, subject.id, correction, 1)
		).rejects.toMatchObject({ code: 'STALE' });
		for (const wrong of [{}, { 'kidney-function': 'none' }, { ...correction.stratum, sex: 'f' }])
			await expect(
				correctStratum(
					scene.coordinator,
					scene.studyId,
					subject.id,
					{ ...correction, stratum: wrong as Record<string, string> },
					await version()
				)
			).rejects.toMatchObject({ code: 'INVALID' });
		await expect(
			correctStratum(
				scene.coordinator,
				scene.studyId,
				subject.id,
				{ ...correction, stratum: { 'kidney-function': 'below-45' } },
				await version()
			)
		).rejects.toMatchObject({ code: 'RULE' });
		expect(
			await correctStratum(
				scene.coordinator,
				scene.studyId,
				subject.id,
				correction,
				await version()
			)
		).toMatchObject({ afterAllocation: true });
		expect(await place()).toEqual(before);
		const [[now] = [], deviations, [event] = []] = await db.sql(
			`select stratum, kit_number from app.subject where id = '${subject.id}'`,
			`select category, detail from app.deviation where subject_id = '${subject.id}'`,
			`select reason, before -> 'stratum' ->> 'kidney-function' as old from audit.event where record = 'subject' and record_id = '${subject.id}' order by id desc limit 1`
		);
		expect(now?.stratum).toEqual({ 'kidney-function': 'from-45', site: '01' });
		expect(now?.kit_number).toBe(before?.[0].kit_number);
		expect(deviations).toHaveLength(1);
		expect(deviations?.[0].detail).toContain('the allocation stays');
		expect(event).toEqual({ reason: 'Read from another report.', old: 'below-45' });
	});
});

describe('an open-label study', () => {
	test('shows the arm to its sites, and only the allocation can write it', async () => {
		const scene = await sceneOf(db, { plannedSubjects: 20, masked: false });
		await listFor(scene);
		const subject = await enrolOne(scene);
		const { arm, kitNumber } = await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		const [[place]] = (await db.sql(
			`select arm_key from closed.list_position where subject_id = '${subject.id}'`
		)) as [{ arm_key: string }[]];
		expect(arm).toBe({ a: 'Treatment A', b: 'Treatment B' }[place!.arm_key]);
		const record = await getSubjectRecord(scene.nurse, scene.studyId, subject.id);
		expect(record.subject).toMatchObject({ arm, kitNumber });
		expect(record.items.find((item) => item.kind === 'randomisation')?.lines).toEqual([
			`${arm}, kit ${kitNumber}.`
		]);
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		await client.query('begin');
		await client.query(`select app.enter($1, 'coordinator', 'test', '', null)`, [
			scene.coordinator.personId
		]);
		await expect(
			client
				.query(`update app.subject set arm_key = 'a' where id = $1`, [subject.id])
				.then(() =>
					client.query(`update app.subject set arm_key = 'b' where id = $1`, [subject.id])
				)
		).rejects.toMatchObject({ code: 'HD006' });
		await client.end();
	});

	test('R-42: a masked one keeps it from everybody, the owner’s own statements included', async () => {
		const scene = await makeScene(db, { plannedSubjects: 20 });
		await listFor(scene);
		const subject = await enrolOne(scene);
		const { arm } = await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		expect(arm).toBeNull();
		await expect(
			asOwner(db, (client) =>
				client.query(`update app.subject set arm_key = 'a' where id = $1`, [subject.id])
			)
		).rejects.toMatchObject({ code: 'HD006' });
	});
});

describe('heddle allocation-list', () => {
	let scene: Scene;
	let code: string;
	const run = (input: string, ...args: string[]) =>
		spawnSync(
			process.execPath,
			[join(root, testBuild.buildDir, 'cli/allocation-list.js'), ...args],
			{
				encoding: 'utf8',
				input,
				env: environmentFor('look-worker', { ...db.env, ORIGIN: 'http://127.0.0.1:1' })
			}
		);
	beforeAll(async () => {
		scene = await makeScene(db, { plannedSubjects: 12 });
		await listFor(scene);
		const hash = await hashPassword(password);
		await asOwner(db, (client) =>
			client.query('update app.person set password_hash = $1 where id = any ($2)', [
				hash,
				[scene.independent, scene.manager, scene.coordinator].map((each) => each.personId)
			])
		);
		const subject = await enrolOne(scene);
		await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		code = (await db.sql(`select code from app.study where id = '${scene.studyId}'`))[0]?.[0].code;
	});

	test('makes the list again for the independent statistician, writes it for its owner alone, and leaves a trace', async () => {
		const file = join(mkdtempSync(join(tmpdir(), 'list-')), 'list.csv');
		const { status, stdout, stderr } = run(
			`${scene.independent.email}\n${password}\n`,
			'--study',
			code,
			'--out',
			file
		);
		expect(stderr).not.toContain(password);
		expect(stdout, stderr).toContain('The list follows from its seed, place by place.');
		expect(status).toBe(0);
		expect(stdout).toContain('48, 1 used');
		expect(statSync(file).mode & 0o777).toBe(0o600);
		const rows = readFileSync(file, 'utf8').trim().split('\r\n');
		expect(rows).toHaveLength(49);
		const [places, events] = await db.sql(
			`select arm_key, kit_number from closed.list_position where study_id = '${scene.studyId}'`,
			`select actor from audit.event where record = 'allocation_list' and action = 'act' and study_id = '${scene.studyId}'`
		);
		for (const { arm_key, kit_number } of places ?? [])
			expect(rows.some((row) => row.includes(`,${arm_key},${kit_number},`))).toBe(true);
		expect(events).toEqual([{ actor: scene.independent.personId }]);
		// Never over a file that is there.
		const again = run(`${scene.independent.email}\n${password}\n`, '--study', code, '--out', file);
		expect(again.status).toBe(1);
		expect(again.stderr).toContain('There is a file of that name already');
	});

	test('refuses everybody else, a wrong password, and tells a study’s outsiders nothing', async () => {
		for (const actor of [scene.manager, scene.coordinator]) {
			const { status, stdout, stderr } = run(`${actor.email}\n${password}\n`, '--study', code);
			expect(status).toBe(1);
			expect(stderr).toContain('Your role does not allow this.');
			expect(stdout).toBe('');
		}
		const wrong = run(`${scene.independent.email}\nnot the password\n`, '--study', code);
		expect([wrong.status, wrong.stdout]).toEqual([1, '']);
		expect(wrong.stderr).toContain('do not belong together');
		const other = await makeScene(db, { plannedSubjects: 4 });
		const theirs = (
			await db.sql(`select code from app.study where id = '${other.studyId}'`)
		)[0]?.[0].code as string;
		const answers = [theirs, 'NO-SUCH'].map((each) =>
			run(`${scene.independent.email}\n${password}\n`, '--study', each)
		);
		expect(answers.map(({ status }) => status)).toEqual([1, 1]);
		expect(answers[0]?.stderr).toBe(answers[1]?.stderr);
		// The web server's own role has no door to it at all.
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		await expect(
			client.query('select closed.read_list($1)', [scene.studyId])
		).rejects.toMatchObject({ code: '42501' });
		await client.end();
	});

	test('says so when a place is not what the seed gives', async () => {
		await db.sql(
			`set session_replication_role = replica`,
			`update closed.list_position set arm_key = case arm_key when 'a' then 'b' else 'a' end
				where id = (select id from closed.list_position where study_id = '${scene.studyId}' order by id limit 1)`
		);
		const { status, stdout } = run(`${scene.independent.email}\n${password}\n`, '--study', code);
		expect(status).toBe(1);
		expect(stdout).toContain('is not what the seed gives');
		expect(stdout).toContain('The list is NOT what its seed gives.');
	});
});
