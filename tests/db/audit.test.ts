import { execFileSync } from 'node:child_process';
import { join } from 'node:path';
import pg from 'pg';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { newId } from '../../src/lib/id';
import { freshDatabase, type FreshDatabase } from '../support/database';
import { sealAll } from '../support/seal';
import { addPerson, addRole, asOwner } from '../support/people';
import { addBareStudy } from '../support/bare-scene';

const system = '00000000-0000-7000-8000-000000000001';
let db: FreshDatabase;
beforeAll(async () => {
	db = await freshDatabase();
});
afterAll(() => db?.drop());

/** Statements in one transaction as the given role; what the last one gave. */
async function as<T extends pg.QueryResultRow>(url: string, ...statements: string[]): Promise<T[]> {
	const client = new pg.Client({ connectionString: url });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter('${system}', 'system', 'test', '', null)`);
		let rows: T[] = [];
		for (const statement of statements) rows = (await client.query<T>(statement)).rows;
		await client.query('commit');
		return rows;
	} finally {
		await client.end();
	}
}

describe('R-3: the application’s own role, and the look worker’s, cannot touch the trail', () => {
	const forbidden = [
		`update audit.event set reason = 'another'`,
		`delete from audit.event`,
		`truncate audit.event`,
		`insert into audit.event (at, actor, role, request_id, action, record, digest) values (now(), '${system}', 'x', 'x', 'act', 'x', '')`,
		`update audit.seal set digest = ''`,
		`delete from audit.seal`,
		`delete from audit.sealed`,
		`insert into audit.seal (events, digest) values (1, '')`,
		`alter table audit.event disable trigger all`,
		`alter table app.person disable trigger person_audit`,
		`drop trigger person_audit on app.person`,
		`set session_replication_role = replica`,
		`select audit.write('act', 'forged', null, null, null, null, false, null, null)`,
		`alter function audit.record_change() rename to gone`,
		`create or replace function audit.record_change() returns trigger language plpgsql as 'begin return new; end'`,
		`delete from app.person`,
		`set role heddle_owner`
	];
	for (const role of ['appUrl', 'unmaskedUrl'] as const)
		test.each(forbidden)(
			`${role === 'appUrl' ? 'application' : 'look worker'}: %s`,
			async (statement) => {
				const [before] = await db.sql('select count(*)::int as n from audit.event');
				await expect(as(db[role], statement)).rejects.toMatchObject({
					code: expect.stringMatching(/^(42501|42883|HD00\d)$/)
				});
				const [after] = await db.sql('select count(*)::int as n from audit.event');
				expect(after?.[0].n).toBe(before?.[0].n);
			}
		);

	test('not even the owner alters or removes an event', async () => {
		await as(db.ownerUrl, `select audit.act('test', null, null, null, null, null)`);
		for (const statement of [
			`update audit.event set reason = 'another'`,
			`delete from audit.event`,
			`truncate audit.event cascade`
		])
			await expect(as(db.ownerUrl, statement)).rejects.toThrow();
	});
});

test('a change with no actor is refused, and so is one by an account that is switched off', async () => {
	const client = new pg.Client({ connectionString: db.appUrl });
	await client.connect();
	try {
		await expect(
			client.query(
				`insert into app.person (id, email, name) values ('${newId()}', 'x@example.org', 'X')`
			)
		).rejects.toMatchObject({ code: 'HD001' });
	} finally {
		await client.end();
	}
	const off = await addPerson(db, { email: 'gone@example.org', name: 'Gone' });
	await asOwner(db, (c) => c.query('update app.person set active = false where id = $1', [off]));
	await expect(
		as(db.appUrl, `select app.enter('${off}', 'own', 'test', '', null)`)
	).rejects.toMatchObject({ code: 'HD001' });
});

test('every table the application may write leaves one event for a row made, with each field', async () => {
	const [writable, audited] = await db.sql(
		`select distinct table_schema || '.' || table_name as name from information_schema.role_table_grants
			where grantee in ('heddle_app', 'heddle_unmasked') and privilege_type in ('INSERT', 'UPDATE', 'DELETE') and table_schema in ('app', 'closed')`,
		`select event_object_schema || '.' || event_object_table as name, array_agg(distinct event_manipulation) as on_what
			from information_schema.triggers where action_statement like '%audit.record%' group by 1`
	);
	const covered = new Map(audited?.map((row) => [row.name, String(row.on_what)]));
	// The limiter counts tries, and the refused ones are recorded by the door.
	const without = (writable ?? []).map((row) => row.name).filter((name) => !covered.has(name));
	expect(without).toEqual(['app.rate_limit']);
	for (const [name, onWhat] of covered)
		if (!['closed.list_position', 'closed.chance'].includes(name))
			expect(`${name} ${onWhat}`).toContain('INSERT');
});

test('an event says who, in which role, what before and after, why, and the request', async () => {
	const id = newId();
	const client = new pg.Client({ connectionString: db.appUrl });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter($1, 'administrator', 'request-7', 'a reason', null)`, [
			system
		]);
		await client.query(
			`insert into app.person (id, email, name, password_hash) values ($1, 'w@example.org', 'Wanda', 'hash')`,
			[id]
		);
		await client.query(`update app.person set name = 'Wanda Weft' where id = $1`, [id]);
		await client.query('commit');
	} finally {
		await client.end();
	}
	const [events] = await db.sql(
		`select action, actor, role, record, record_id, before, after, reason, request_id, at from audit.event where record_id = '${id}' order by id`
	);
	expect(events).toHaveLength(2);
	expect(events?.[0]).toMatchObject({
		action: 'create',
		actor: system,
		role: 'administrator',
		record: 'person',
		before: null,
		after: { name: 'Wanda', password_hash: '[secret]' }
	});
	expect(events?.[1]).toMatchObject({
		action: 'change',
		before: { name: 'Wanda' },
		after: { name: 'Wanda Weft' },
		reason: 'a reason',
		request_id: 'request-7'
	});
});

test('R-7: the application cannot set the time of an event', async () => {
	const told = '2001-01-01T00:00:00Z';
	await as(
		db.appUrl,
		`select app.enter('${system}', 'system', 'backdated', '', '${told}')`,
		`select audit.act('test', null, null, null, null, null)`
	);
	await as(
		db.appUrl,
		`select set_config('heddle.clock', '${told}', true)`,
		`select audit.act('test', 'backdated', null, null, null, null)`
	);
	const [events] = await db.sql(
		`select at > now() - interval '1 hour' as now, wall_at > now() - interval '1 hour' as wall from audit.event where request_id = 'backdated' or record_id = 'backdated'`
	);
	expect(events).toEqual([
		{ now: true, wall: true },
		{ now: true, wall: true }
	]);
});

test('R-41: the application’s role reads no table of the closed schema', async () => {
	const [tables] = await db.sql(
		`select table_name as name from information_schema.tables where table_schema = 'closed'`
	);
	expect(tables?.length).toBeGreaterThan(5);
	for (const { name } of tables ?? [])
		for (const statement of [
			`select * from closed.${name}`,
			`select count(*) from closed.${name}`,
			`insert into closed.${name} default values`,
			`delete from closed.${name}`,
			`copy closed.${name} to stdout`
		])
			await expect(as(db.appUrl, statement), statement).rejects.toMatchObject({ code: '42501' });
});

test('the trail shows a person only the studies and sites of his roles', async () => {
	const [one, two] = [await addBareStudy(db, 'TR-1'), await addBareStudy(db, 'TR-2')];
	const monitor = await addPerson(db, { email: 'mona@example.org', name: 'Mona Pick' });
	await addRole(db, monitor, 'monitor', one.studyId, one.siteIds[0]);
	await asOwner(db, async (client) => {
		for (const [study, site] of [
			[one.studyId, one.siteIds[0]],
			[one.studyId, one.siteIds[1]],
			[two.studyId, two.siteIds[0]]
		])
			await client.query(`select audit.act('seen', $2::text, $1::uuid, $2::uuid, null, null)`, [
				study,
				site
			]);
	});
	const client = new pg.Client({ connectionString: db.appUrl });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter($1, 'monitor', 'test', '', null)`, [monitor]);
		const { rows } = await client.query(`select site_id from audit.event where record = 'seen'`);
		expect(rows).toEqual([{ site_id: one.siteIds[0] }]);
		await client.query('commit');
	} finally {
		await client.end();
	}
});

describe('R-12: breaks in a copy are named', () => {
	/** What the command prints, and its status. */
	function verify(copy: FreshDatabase): { status: number; printed: string } {
		try {
			const printed = execFileSync(
				process.execPath,
				[join(root, testBuild.buildDir, 'cli/admin.js'), 'verify-audit'],
				{
					encoding: 'utf8',
					env: environmentFor('admin', { ...copy.env, ORIGIN: 'http://127.0.0.1:1' })
				}
			);
			return { status: 0, printed };
		} catch (error) {
			const { status, stdout, stderr } = error as Record<'stdout' | 'stderr', string> & {
				status: number;
			};
			return { status, printed: stdout + stderr };
		}
	}
	async function sealedCopy(): Promise<FreshDatabase> {
		const copy = await freshDatabase();
		for (let batch = 0; batch < 3; batch++) {
			for (let n = 0; n < 4; n++)
				await as(
					copy.ownerUrl,
					`select audit.act('note', '${batch}-${n}', null, null, null, '{"n": ${n}}')`
				);
			await as(copy.appUrl, 'select audit.seal_now()');
			await sealAll(copy);
		}
		return copy;
	}
	const eventAt = async (copy: FreshDatabase, recordId: string): Promise<string> =>
		(await copy.sql(`select id from audit.event where record_id = '${recordId}'`))[0]?.[0].id;

	test('a whole trail: status 0, with the counts and what is not sealed yet', async () => {
		const copy = await sealedCopy();
		try {
			await as(copy.ownerUrl, `select audit.act('note', 'late', null, null, null, null)`);
			const { status, printed } = verify(copy);
			expect(status).toBe(0);
			expect(printed).toMatch(/\d+ events, \d+ sealed in \d+ seals, 1 not sealed yet\./);
			expect(printed).toContain('The audit trail is whole.');
		} finally {
			await copy.drop();
		}
	});

	test.each<[string, (id: string) => string[], (id: string) => RegExp]>([
		[
			'an altered row',
			(id) => [`update audit.event set after = '{"n": 99}' where id = ${id}`],
			(id) => new RegExp(`event ${id}, seal \\d+: the row was altered`)
		],
		[
			'an altered row whose own digest was made again',
			(id) => [
				`update audit.event set after = '{"n": 99}' where id = ${id}`,
				`update audit.event e set digest = audit.digest_of(e) where id = ${id}`
			],
			() => /seal \d+: the sealed rows are not the ones that were sealed/
		],
		[
			'a dropped row',
			(id) => [`delete from audit.event where id = ${id}`],
			(id) => new RegExp(`event ${id}, seal \\d+: the row is missing`)
		],
		[
			'a row dropped with its seal’s mark',
			(id) => [
				`delete from audit.sealed where event_id = ${id}`,
				`delete from audit.event where id = ${id}`
			],
			() => /seal \d+: 1 of \d+ sealed rows are missing/
		],
		[
			'a dropped seal',
			(id) => [
				`delete from audit.seal where number = (select seal from audit.sealed where event_id = ${id})`,
				`delete from audit.sealed where event_id = ${id}`
			],
			() => /seal \d+: the seal does not follow the one before it/
		]
	])('%s', async (_, damage, told) => {
		const copy = await sealedCopy();
		try {
			const id = await eventAt(copy, '1-2');
			await copy.sql('set session_replication_role = replica', ...damage(id));
			const { status, printed } = verify(copy);
			expect(printed).toMatch(told(id));
			expect(status).toBe(1);
		} finally {
			await copy.drop();
		}
	});
});
