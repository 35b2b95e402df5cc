import { spawnSync } from 'node:child_process';
import {
	cpSync,
	existsSync,
	mkdirSync,
	mkdtempSync,
	readFileSync,
	readdirSync,
	rmSync,
	statSync,
	writeFileSync
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { folderArea } from '../../scripts/lib/areas.mjs';
import {
	backup,
	countsIn,
	entriesOf,
	restoreDatabase,
	verifiedManifest
} from '../../scripts/lib/backup.mjs';
import { openCluster, startCluster } from '../../scripts/lib/cluster.mjs';
import {
	createDatabase,
	dropDatabase,
	ensureRoles,
	sql,
	urls
} from '../../scripts/lib/databases.mjs';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { anyFreePort } from '../../scripts/lib/ports.mjs';
import { secrets } from '../../scripts/lib/secrets.mjs';
import { removeTestCluster, testBuild, testState } from '../../scripts/lib/test-cluster.mjs';
import { newId } from '../../src/lib/id';
import { cluster, freshDatabase, type FreshDatabase } from '../support/database';
import { sealAll } from '../support/seal';
import { asOwner } from '../support/people';

const keys = { AUTH_SECRET: 'a', HEDDLE_KEY: 'b', CLOSED_KEY: 'c' };
const now = new Date('2026-03-01T09:00:00Z');
const places = mkdtempSync(join(tmpdir(), 'heddle-backup-'));
let database: FreshDatabase;
let whole: string;

/** An empty database as a fresh installation has it. */
async function emptyDatabase(name: string) {
	const inside = new URL(database.superUrl);
	inside.pathname = '/postgres';
	await dropDatabase(inside.href, name);
	await createDatabase(inside.href, name);
	inside.pathname = `/${name}`;
	return { url: inside.href, drop: () => dropDatabase(database.superUrl, name) };
}

beforeAll(async () => {
	database = await freshDatabase({ template: cluster(true).demo ? 'demo' : 'migrated' });
	// A table held back from its own owner, as the study tables are.
	await database.sql(
		`set role heddle_owner; create table public.held (n int); insert into public.held select generate_series(1, 50);
		alter table public.held enable row level security; alter table public.held force row level security`
	);
	// A trail of several seals and of events that no seal covers yet.
	for (const batch of [1, 2, 3]) {
		await asOwner(database, async (client) => {
			for (let n = 0; n < 5; n++)
				await client.query(`select audit.act('note', $1, null, null, null, '{}')`, [
					`${batch}-${n}`
				]);
		});
		if (batch < 3) await sealAll(database);
	}
	mkdirSync(join(database.files, 'open/ab'), { recursive: true });
	writeFileSync(join(database.files, 'open/ab/consent.bin'), 'a scanned page');
	writeFileSync(join(database.files, 'closed/report.bin'), 'a closed report');
	whole = join(places, 'whole');
	await backup({
		folder: whole,
		databaseUrl: database.superUrl,
		areas: areas(database.files),
		keys,
		now
	});
});

/** A command of the administrator's program on a database: its status and what it printed. */
function admin(env: Record<string, string>, what: string): { status: number; printed: string } {
	const ran = spawnSync(process.execPath, [join(root, testBuild.buildDir, 'cli/admin.js'), what], {
		encoding: 'utf8',
		cwd: root,
		env: environmentFor('admin', { ORIGIN: 'http://127.0.0.1:1', ...env })
	});
	return { status: ran.status ?? -1, printed: ran.stdout + ran.stderr };
}

const areas = (files: string) => [
	folderArea('files', join(files, 'open')),
	folderArea('closed-files', join(files, 'closed'))
];

afterAll(async () => {
	await database?.drop();
	rmSync(places, { recursive: true, force: true });
});

describe('a backup', () => {
	it('holds the database, the stored files and the keys, readable by nobody else, with a fingerprint of each', async () => {
		const manifest = await verifiedManifest(whole);
		expect(manifest.made).toBe('2026-03-01T09:00:00.000Z');
		expect(manifest.files.map(({ path }) => path)).toEqual(
			expect.arrayContaining([
				'database.dump',
				'files/ab/consent.bin',
				'closed-files/report.bin',
				'secrets/AUTH_SECRET',
				'secrets/CLOSED_KEY',
				'secrets/HEDDLE_KEY'
			])
		);
		expect(manifest.counts['public.held']).toBe(50);
		expect(statSync(whole).mode & 0o777).toBe(0o700);
		expect(statSync(join(whole, 'secrets/CLOSED_KEY')).mode & 0o777).toBe(0o600);
	});

	it('comes back into an empty database with the same rows in every table, owners and grants included', async () => {
		const target = await emptyDatabase('backup_whole');
		const manifest = await verifiedManifest(whole);
		await restoreDatabase({ folder: whole, manifest, databaseUrl: target.url });
		expect(await countsIn(target.url)).toEqual(await countsIn(database.superUrl));
		const rights = `select n.nspname, c.relname, pg_get_userbyid(c.relowner) as owner, c.relacl::text, c.relforcerowsecurity
			from pg_class c join pg_namespace n on n.oid = c.relnamespace
			where n.nspname !~ '^pg_|information_schema' and c.relkind in ('r', 'v', 'S', 'p') order by 1, 2`;
		expect((await sql(target.url, rights))[0]).toEqual((await database.sql(rights))[0]);
		const triggers = `select tgrelid::regclass::text as t, tgname, tgenabled from pg_trigger where not tgisinternal order by 1, 2`;
		expect((await sql(target.url, triggers))[0]).toEqual((await database.sql(triggers))[0]);
		await target.drop();

		const files = join(places, 'files');
		for (const area of areas(files)) {
			expect(await area.isEmpty()).toBe(true);
			await area.fillFrom(join(whole, area.name));
		}
		expect(await entriesOf(join(files, 'open'))).toEqual(
			await entriesOf(join(database.files, 'open'))
		);
		expect(readFileSync(join(files, 'closed/report.bin'), 'utf8')).toBe('a closed report');
	});

	it('comes back into an empty cluster with a trail that is whole, and what is changed there is sealed on top of it', async () => {
		const state = testState('restored');
		await removeTestCluster('restored');
		mkdirSync(state, { recursive: true });
		const passwords = secrets(state);
		const bare = await openCluster({
			state,
			port: await anyFreePort(),
			passwords,
			throwAway: true,
			say: () => {}
		});
		try {
			await startCluster(bare);
			const at = (name: string) => urls(bare, passwords, name);
			await ensureRoles(at('postgres').superUrl, passwords);
			await createDatabase(at('postgres').superUrl, 'heddle');
			const manifest = await verifiedManifest(whole);
			await restoreDatabase({ folder: whole, manifest, databaseUrl: at('heddle').superUrl });
			expect(await countsIn(at('heddle').superUrl)).toEqual(await countsIn(database.superUrl));
			const restored = {
				...database.env,
				DATABASE_URL: at('heddle').appUrl,
				ORIGIN: 'http://127.0.0.1:1'
			};
			const before = admin(database.env, 'verify-audit');
			expect(before.printed).toContain('5 not sealed yet');
			// The same events, the same seals, the same newest seal, and every digest worked out again.
			expect(admin(restored, 'verify-audit')).toEqual(before);
			const owner = { ...database, ownerUrl: at('heddle').ownerUrl };
			await asOwner(owner, (client) =>
				client.query(`insert into app.person (id, email, name) values ($1, $2, 'Rosa After')`, [
					newId(),
					'rosa@example.org'
				])
			);
			expect(admin(restored, 'seal')).toEqual({ status: 0, printed: '6 events sealed.\n' });
			const after = admin(restored, 'verify-audit');
			expect(after.status).toBe(0);
			expect(after.printed).toContain(', 0 not sealed yet.');
			expect(after.printed).toContain('The audit trail is whole.');
			// And the check still finds a row that was altered there.
			await sql(
				at('heddle').superUrl,
				`set session_replication_role = replica`,
				`update audit.event set after = '{"forged": true}' where record_id = '1-2'`
			);
			const forged = admin(restored, 'verify-audit');
			expect(forged.status).toBe(1);
			expect(forged.printed).toContain('the row was altered after it was written');
		} finally {
			await removeTestCluster('restored');
		}
	});

	it('is refused when a file is altered, missing or added, and when it was never finished', async () => {
		const harm: [string, (folder: string) => void, string][] = [
			[
				'altered',
				(f) => writeFileSync(join(f, 'files/ab/consent.bin'), 'a scanned pagE'),
				'consent.bin is not what was saved'
			],
			['missing', (f) => rmSync(join(f, 'secrets/HEDDLE_KEY')), 'secrets/HEDDLE_KEY is missing'],
			[
				'added',
				(f) => writeFileSync(join(f, 'files/extra'), ''),
				'files/extra does not belong to it'
			],
			['unfinished', (f) => rmSync(join(f, 'manifest.json')), 'never finished']
		];
		for (const [name, act, message] of harm) {
			const copy = join(places, name);
			cpSync(whole, copy, { recursive: true });
			act(copy);
			await expect(verifiedManifest(copy), name).rejects.toThrow(message);
		}
	});

	it('is not restored over anything, and not by halves', async () => {
		const manifest = await verifiedManifest(whole);
		const before = await countsIn(database.superUrl);
		await expect(
			restoreDatabase({ folder: whole, manifest, databaseUrl: database.superUrl })
		).rejects.toThrow('not empty');
		expect(await countsIn(database.superUrl)).toEqual(before);

		const cut = join(places, 'cut');
		cpSync(whole, cut, { recursive: true });
		const dump = readFileSync(join(cut, 'database.dump'));
		writeFileSync(join(cut, 'database.dump'), dump.subarray(0, Math.floor(dump.length * 0.9)));
		const target = await emptyDatabase('backup_cut');
		await expect(
			restoreDatabase({ folder: cut, manifest, databaseUrl: target.url })
		).rejects.toThrow('pg_restore failed');
		expect(await countsIn(target.url)).toEqual({});
		await target.drop();
	});

	it('is refused for a role that would miss rows, without its keys, and into a folder that holds something', async () => {
		const asked = { databaseUrl: database.superUrl, areas: [], keys, now };
		await expect(
			backup({ ...asked, folder: join(places, 'no'), databaseUrl: database.ownerUrl })
		).rejects.toThrow('Row-level security');
		await expect(
			backup({ ...asked, folder: join(places, 'no'), keys: { ...keys, CLOSED_KEY: '' } })
		).rejects.toThrow('set CLOSED_KEY');
		await expect(backup({ ...asked, folder: whole })).rejects.toThrow('is not empty');
		expect(existsSync(join(places, 'no'))).toBe(false);
		expect(readdirSync(places).filter((name) => name.endsWith('.partial'))).toEqual([]);
	});
});
