import {
	chmodSync,
	existsSync,
	mkdirSync,
	mkdtempSync,
	readdirSync,
	rmSync,
	statSync,
	writeFileSync
} from 'node:fs';
import { join } from 'node:path';
import { afterAll, describe, expect, it } from 'vitest';
import {
	clusterExists,
	openCluster,
	runningServer,
	startCluster,
	stopCluster
} from './cluster.mjs';
import { createDatabase, ensureRoles, sql, urls } from './databases.mjs';
import { folder, root } from './places.mjs';
import { anyFreePort } from './ports.mjs';
import { secrets } from './secrets.mjs';

// Beside the project's other state, where the server's user can reach it.
const state = mkdtempSync(join(folder(join(root, '.heddle-try'), 0o711), 'cluster-'));
chmodSync(state, 0o711);
const said: string[] = [];
const open = async () =>
	openCluster({
		state,
		port: await anyFreePort(),
		passwords: secrets(state),
		say: (line) => said.push(line)
	});

afterAll(async () => {
	if (clusterExists(state)) await stopCluster(await open(), 'immediate');
	rmSync(state, { recursive: true, force: true });
});

describe('the private cluster', () => {
	it('is made afresh after a run that was killed while making it, and never passes for finished', async () => {
		const half = join(state, 'cluster/data.new-1');
		mkdirSync(half, { recursive: true });
		writeFileSync(join(half, 'PG_VERSION'), '15\n');
		expect(clusterExists(state)).toBe(false);
		const cluster = await open();
		expect(said.join('\n')).toContain('making it afresh');
		expect(clusterExists(state)).toBe(true);
		expect(readdirSync(cluster.home)).toEqual(['data']);
		expect(statSync(cluster.data).mode & 0o777).toBe(0o700);
	});

	it('asks for passwords, listens on loopback only, and its roles can do no more than their own', async () => {
		const cluster = await open();
		const keys = secrets(state);
		await startCluster(cluster);
		const { superUrl } = urls(cluster, keys, 'postgres');
		await ensureRoles(superUrl, keys);
		await createDatabase(superUrl, 'heddle');
		const own = urls(cluster, keys, 'heddle');
		await expect(sql(own.appUrl.replace(keys.heddle_app!, 'wrong'), 'select 1')).rejects.toThrow(
			/password authentication failed/
		);
		const [[address], roles, [database]] = await sql(
			superUrl,
			'show listen_addresses',
			`select rolname, rolsuper or rolcreaterole or rolcreatedb or rolreplication or rolbypassrls as more,
				(select count(*)::int from pg_auth_members m where m.member = r.oid) as memberships
			from pg_roles r where rolname like 'heddle%' order by 1`,
			`select pg_get_userbyid(datdba) as owner, has_database_privilege('public', 'heddle', 'connect') as open from pg_database where datname = 'heddle'`
		);
		expect(address).toEqual({ listen_addresses: '127.0.0.1' });
		expect(roles).toEqual(
			['heddle_app', 'heddle_owner', 'heddle_unmasked'].map((rolname) => ({
				rolname,
				more: false,
				memberships: 0
			}))
		);
		expect(database).toEqual({ owner: 'heddle_owner', open: false });
		for (const url of [own.appUrl, own.unmaskedUrl])
			await expect(sql(url, 'create table public.mine (n int)')).rejects.toThrow(
				/permission denied/
			);
		await sql(
			own.ownerUrl,
			'create table public.kept (n int)',
			'insert into public.kept values (1)'
		);
	});

	it('keeps its data when the server is killed, and is found again when it still runs', async () => {
		const cluster = await open();
		const running = runningServer(cluster)!;
		expect(running.pid).toBeGreaterThan(1);
		process.kill(running.pid, 'SIGKILL');
		for (let i = 0; i < 200 && runningServer(cluster); i++)
			await new Promise((done) => setTimeout(done, 50));
		expect(runningServer(cluster)).toBeNull();
		let started = false;
		// The killed server's own children take a moment to notice and to let go of the data.
		for (let i = 0; i < 20 && !started; i++)
			started = await startCluster(cluster).then(
				() => true,
				() => new Promise<boolean>((done) => setTimeout(() => done(false), 500))
			);
		expect(started).toBe(true);
		expect(
			(await sql(urls(cluster, secrets(state), 'heddle').ownerUrl, 'select n from public.kept'))[0]
		).toEqual([{ n: 1 }]);
		await stopCluster(cluster);
		expect(runningServer(cluster)).toBeNull();
	});

	it('is never touched when its folder holds something that is no cluster', async () => {
		const cluster = await open();
		rmSync(join(cluster.data, 'PG_VERSION'));
		await expect(open()).rejects.toThrow('Nothing was touched');
		expect(existsSync(join(cluster.data, 'base'))).toBe(true);
	});
});
