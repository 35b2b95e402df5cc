import pg from 'pg';
import { afterAll, beforeAll, beforeEach, afterEach, describe, expect, test } from 'vitest';
import {
	planKits,
	receiveKits,
	sendKits,
	setKitLevel
} from '../../src/lib/domain/kit/kit.commands.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { unmaskSubject } from '../../src/lib/domain/unmasking/unmasking.commands.server';
import { hashPassword } from '../../src/lib/server/auth/password';
import { startSession } from '../../src/lib/server/auth/session';
import { newId } from '../../src/lib/id';
import { addBareSubjects, sceneOf } from '../support/allocation-scene';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { makeList, useAs, type Scene } from '../support/scene';

/**
 * What the web server's own database role can get at, by whatever statement. The arms have names that stand nowhere else:
 * wherever one turns up outside the protocol, something leaked.
 */
const arms = ['zaffre', 'quinacridone'];
const named = /zaffre|quinacridone/i;
const password = 'linen warp and weft';
let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
let client: pg.Client;
let seed: string;
let unused: string[];
let closedTables: string[];

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	scene = await sceneOf(db, {
		plannedSubjects: 40,
		allocation: { method: 'minimisation' },
		arms: arms.map((key) => ({ key, name: `Dose of ${key}`, ratio: 1 }))
	});
	await planKits(scene.manager, scene.studyId, { useDays: 0 });
	await makeList(db, scene, 0.8);
	end = useAs(db.appUrl);
	const siteId = scene.sites[0]?.id as string;
	await setKitLevel(scene.manager, scene.studyId, {
		siteId,
		fullStock: 40,
		resupplyAt: 30,
		version: 0
	});
	const { id } = await sendKits(scene.manager, scene.studyId, { siteId, expiresOn: '2099-01-31' });
	await receiveKits(scene.coordinator, scene.studyId, id);
	const subjects = await addBareSubjects(db, scene, 12, () => ({ site: 0 }));
	for (const each of subjects) await randomiseSubject(scene.coordinator, scene.studyId, each.id);
	const hash = await hashPassword(password);
	const { investigator } = scene;
	await asOwner(db, (owner) =>
		owner.query('update app.person set password_hash = $1 where id = $2', [
			hash,
			investigator.personId
		])
	);
	const sessionId = await startSession(
		{ id: investigator.personId, name: investigator.name, email: investigator.email },
		'password',
		'test',
		'test'
	);
	await unmaskSubject({ ...investigator, sessionId }, scene.studyId, subjects[0]!.id, {
		reason: 'Unconscious.',
		email: investigator.email,
		password
	});
	// Statistics are gathered, as they are on a server that runs.
	await db.sql('analyze');
	const [[list] = [], kits, tables] = await db.sql(
		`select seed from closed.allocation_list`,
		`select kit_number from closed.list_position p where subject_id is null
			and not exists (select from app.kit k where k.kit_number = p.kit_number)`,
		`select c.relname as name from pg_class c join pg_namespace n on n.oid = c.relnamespace where n.nspname = 'closed' and c.relkind in ('r', 'v', 'm', 'p')`
	);
	seed = list?.seed;
	unused = (kits ?? []).map((row) => row.kit_number);
	closedTables = (tables ?? []).map((row) => row.name);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});
beforeEach(async () => {
	client = new pg.Client({ connectionString: db.appUrl });
	client.on('error', () => {});
	await client.connect();
});
afterEach(() => client.end());

const enter = (who: { personId: string } = scene.coordinator) =>
	client.query(`select app.enter($1, 'any', 'test', '', null)`, [who.personId]);

/** Nothing in the text that only the closed side knows. */
function mustNotTell(text: string, where: string): void {
	expect(named.test(text), `${where}: ${named.exec(text)?.[0]}`).toBe(false);
	expect(text.includes(seed), `${where}: the seed`).toBe(false);
	expect(
		unused.filter((kit) => text.includes(kit)),
		`${where}: unused kits`
	).toEqual([]);
}

/** Refused for want of permission, and the error tells nothing. */
async function refused(text: string): Promise<void> {
	const error = await client.query(text).then(
		() => null,
		(thrown: pg.DatabaseError) => thrown
	);
	expect(error, text).not.toBeNull();
	expect(['42501', 'HD010', 'HD006', '0A000'], `${text}: ${error?.message}`).toContain(error?.code);
	mustNotTell(JSON.stringify([error?.message, error?.detail, error?.hint, error?.where]), text);
}

describe('R-41: the application’s database role', () => {
	test('sees the scene as it is: there is something to find', () => {
		expect(closedTables.length).toBeGreaterThan(12);
		expect(seed).toMatch(/^[0-9a-f]{64}$/);
		expect(unused.length).toBeGreaterThan(50);
	});

	test('can read, write, copy, lock, explain or describe no row of a closed table, by no statement', async () => {
		await enter();
		for (const name of closedTables)
			for (const text of [
				`select * from closed.${name} limit 1`,
				`select count(*) from closed.${name}`,
				`select 1 from closed.${name} where ctid is not null`,
				`table closed.${name}`,
				`insert into closed.${name} default values`,
				`delete from closed.${name}`,
				`truncate closed.${name}`,
				`copy closed.${name} to stdout`,
				`do $$ begin lock table closed.${name} in share mode; end $$`,
				`explain select * from closed.${name}`,
				`explain analyze select * from closed.${name}`,
				`create temp table mine as select * from closed.${name}`,
				`create temp view seen as select * from closed.${name}; select * from seen`,
				`select * from closed.${name} for update`,
				`comment on table closed.${name} is 'x'`,
				`create index on closed.${name} ((1))`,
				`alter table closed.${name} owner to heddle_app`,
				`grant select on closed.${name} to heddle_app`,
				`create trigger t before insert on closed.${name} for each row execute function app.bump_version()`
			])
				await refused(text);
	});

	test('has no privilege on a closed table or column, and only the functions that were meant for it', async () => {
		const { rows: tables } = await client.query(
			`select c.relname, p.privilege from pg_class c join pg_namespace n on n.oid = c.relnamespace,
				unnest(array['select', 'insert', 'update', 'delete', 'truncate', 'references', 'trigger']) p(privilege)
			where n.nspname = 'closed' and c.relkind in ('r', 'v', 'm', 'p') and has_table_privilege(c.oid, p.privilege)`
		);
		expect(tables).toEqual([]);
		const { rows: columns } = await client.query(
			`select c.relname from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname = 'closed' and c.relkind in ('r', 'v', 'm', 'p') and has_any_column_privilege(c.oid, 'select, insert, update, references')`
		);
		expect(columns).toEqual([]);
		const { rows: functions } = await client.query(
			`select p.proname as name from pg_proc p join pg_namespace n on n.oid = p.pronamespace
			where n.nspname = 'closed' and has_function_privilege(p.oid, 'execute') order by 1`
		);
		expect(functions.map((row) => row.name)).toEqual(
			[
				'allocate',
				'choose_chance',
				'freeze_allocation',
				'open_codes',
				'open_copy',
				'open_report',
				'read_look',
				'request_look',
				'send_kits',
				'unmask',
				'use_code'
			].sort()
		);
	});

	test('finds nothing in the statistics the planner keeps, nor anywhere else in the catalogs', async () => {
		await enter();
		for (const text of [
			'select * from pg_statistic',
			'select * from pg_statistic_ext_data',
			'select * from pg_largeobject',
			'select * from pg_authid',
			'select * from pg_user_mapping'
		])
			await refused(text);
		const { rows: stats } = await client.query(
			`select tablename from pg_stats where schemaname = 'closed'`
		);
		expect(stats).toEqual([]);
		const { rows: views } = await client.query(
			`select c.relname as name from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname = 'pg_catalog' and c.relkind in ('r', 'v') and has_table_privilege(c.oid, 'select')
				and c.relname not in ('pg_attribute', 'pg_proc', 'pg_depend', 'pg_description', 'pg_stats')
			order by 1`
		);
		expect(views.length).toBeGreaterThan(80);
		for (const { name } of views) {
			const found = await client
				.query(`select coalesce(string_agg(t::text, E'\\n'), '') as text from pg_catalog.${name} t`)
				.catch((error: pg.DatabaseError) => ({ rows: [{ text: JSON.stringify(error) }] }));
			mustNotTell(found.rows[0].text, name);
		}
		// The planner's statistics of what it may read: of the protocol's own text, arms are a part and may be seen.
		const { rows: open } = await client.query(
			`select t::text as text from pg_stats t where not (tablename = 'protocol_version' or (schemaname = 'audit' and attname in ('after', 'before')))`
		);
		mustNotTell(open.map((row) => row.text).join('\n'), 'pg_stats');
		const { rows: source } = await client.query(
			`select string_agg(prosrc, '') as text from pg_proc p join pg_namespace n on n.oid = p.pronamespace where n.nspname in ('closed', 'app', 'audit')`
		);
		mustNotTell(source[0].text, 'pg_proc');
	});

	test('finds nothing in any row it may read, whoever it says is asking', async () => {
		const { rows: tables } = await client.query(
			`select n.nspname || '.' || c.relname as name from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname in ('app', 'audit', 'queue') and c.relkind in ('r', 'v', 'p') and has_table_privilege(c.oid, 'select') order by 1`
		);
		expect(tables.length).toBeGreaterThan(40);
		for (const who of [scene.manager, scene.coordinator, scene.investigator, scene.independent]) {
			await client.query('begin');
			await enter(who);
			for (const { name } of tables) {
				if (name === 'app.protocol_version') continue;
				const where = name === 'audit.event' ? `where record <> 'protocol_version'` : '';
				const { rows } = await client.query(
					`select coalesce(string_agg(t::text, E'\\n'), '') as text from ${name} t ${where}`
				);
				mustNotTell(rows[0].text, `${name} as ${who.name}`);
			}
			await client.query('rollback');
		}
	});

	test('cannot become another role, read files, run programs or switch anything off', async () => {
		await enter();
		for (const text of [
			'set role heddle_unmasked',
			'set role heddle_owner',
			'set session authorization heddle_unmasked',
			`set session_replication_role = replica`,
			`select pg_read_file('postgresql.conf')`,
			`select pg_ls_dir('.')`,
			`select lo_import('/etc/hostname')`,
			`copy (select 1) to program 'true'`,
			`copy (select 1) to '/tmp/out'`,
			`create schema mine`,
			`create function closed.mine() returns text language sql security definer as 'select seed from closed.allocation_list'`,
			`create extension dblink schema app`,
			`alter table app.subject disable row level security`,
			`alter table app.subject disable trigger all`,
			`alter function closed.allocate(uuid) owner to heddle_app`
		])
			await refused(text);
		const { rows } = await client.query(
			`select string_agg(name || '=' || coalesce(setting, ''), E'\\n') as text from pg_settings`
		);
		mustNotTell(rows[0].text, 'pg_settings');
		expect(
			(await client.query(`select current_setting('heddle.seed', true) as s`)).rows[0].s
		).toBeNull();
		// A function of its own in the temporary schema runs as itself.
		await client.query(
			`create function pg_temp.mine() returns text language plpgsql security definer as $$ begin return (select seed from closed.allocation_list limit 1); end $$`
		);
		await refused('select pg_temp.mine()');
	});

	test('sees nothing of what the look worker runs, and hears nothing while somebody is randomised', async () => {
		const worker = new pg.Client({ connectionString: db.unmaskedUrl });
		await worker.connect();
		await worker.query(`select 'zaffre' as marker, pg_sleep(0)`);
		const { rows } = await client.query('select t::text as text from pg_stat_activity t');
		expect(rows.length).toBeGreaterThan(1);
		mustNotTell(rows.map((row) => row.text).join('\n'), 'pg_stat_activity');
		await worker.end();
		const heard: string[] = [];
		client.on('notification', ({ payload }) => heard.push(payload ?? ''));
		const said: string[] = [];
		client.on('notice', (notice) => said.push(JSON.stringify(notice)));
		await client.query('listen heddle; listen queue; listen "closed.list_position"');
		await client.query(`set client_min_messages = 'debug1'`);
		const [one] = await addBareSubjects(db, scene, 1, () => ({ site: 0 }));
		await client.query('begin');
		await enter();
		const answer = await client.query('select closed.allocate($1) as kit', [one!.id]);
		await client.query('commit');
		expect(answer.rows[0].kit).toMatch(/^K\d{5,}-\d$/);
		expect(heard).toEqual([]);
		mustNotTell(said.join('\n'), 'notices');
	});

	test('is told an arm by no function when it speaks for anybody masked, and by none for the wrong study', async () => {
		const [[subject] = []] = await db.sql(
			`select subject_id as id from closed.list_position where subject_id is not null limit 1`
		);
		const elsewhere = await sceneOf(db, { plannedSubjects: 4 });
		const masked = [
			scene.manager,
			scene.coordinator,
			scene.nurse,
			await scene.person('monitor', scene.sites[0]?.id),
			await scene.person('auditor'),
			await scene.person('statistician'),
			elsewhere.investigator,
			elsewhere.independent
		];
		for (const who of masked) {
			await client.query('begin');
			await enter(who);
			for (const text of [
				`select closed.unmask('${newId()}', '${subject?.id}', 'x')`,
				`select * from closed.open_codes('${newId()}')`,
				`select * from closed.open_copy('${newId()}')`,
				`select * from closed.open_report('${newId()}')`,
				`select closed.read_look('${newId()}')`,
				`select closed.choose_chance('${scene.studyId}', 0.9)`,
				`select closed.read_list('${scene.studyId}')`,
				`select closed.minimised_arm('${newId()}', '{}', 0, 0)`,
				`select closed.spare_kits('${scene.studyId}', 10)`
			]) {
				await client.query('savepoint before');
				await refused(text);
				await client.query('rollback to before');
			}
			await client.query('rollback');
		}
	});
});
