import { mkdtempSync, readFileSync, statSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { environmentFor } from './environment.mjs';
import { takeLock } from './lock.mjs';
import { Processes, backOff } from './processes.mjs';
import { idsIn, requirementsIn } from './requirements.mjs';
import { tally } from './results.mjs';
import { explain } from './say.mjs';
import { secrets } from './secrets.mjs';

const newFolder = () => mkdtempSync(join(tmpdir(), 'heddle-start-'));

describe('what each process is given', () => {
	const all = {
		DATABASE_URL: 'app',
		DATABASE_OWNER_URL: 'owner',
		DATABASE_UNMASKED_URL: 'unmasked',
		AUTH_SECRET: 'auth',
		HEDDLE_KEY: 'key',
		CLOSED_KEY: 'closed key',
		CLOSED_STORAGE_DIR: 'closed files',
		STORAGE_DIR: 'files',
		BACKUP_DATABASE_URL: 'backup'
	};
	const surroundings = { PATH: '/bin', ...all };

	it('never gives the web server or a worker what is closed, nor the owner', () => {
		for (const kind of ['web', 'worker', 'admin'] as const) {
			const env = environmentFor(kind, all, surroundings);
			expect(env).toMatchObject({ PATH: '/bin', DATABASE_URL: 'app', HEDDLE_KEY: 'key' });
			for (const name of [
				'DATABASE_OWNER_URL',
				'DATABASE_UNMASKED_URL',
				'CLOSED_KEY',
				'BACKUP_DATABASE_URL'
			])
				expect(env).not.toHaveProperty(name);
		}
	});

	it('gives the migrations the owner alone, the look worker the closed part, the fakes nothing', () => {
		expect(environmentFor('migrate', all, surroundings)).toEqual({
			PATH: '/bin',
			DATABASE_OWNER_URL: 'owner'
		});
		const look = environmentFor('look-worker', all, surroundings);
		expect(look).toMatchObject({ DATABASE_UNMASKED_URL: 'unmasked', CLOSED_KEY: 'closed key' });
		expect(look).not.toHaveProperty('DATABASE_OWNER_URL');
		expect(environmentFor('none', all, surroundings)).toEqual({ PATH: '/bin' });
	});
});

describe('one run at a time', () => {
	it('is turned away while the holder lives and says who it is', () => {
		const path = join(newFolder(), 'lock');
		// The parent of this test process is alive and is a node program.
		writeFileSync(
			path,
			JSON.stringify({ pid: process.ppid, script: 'node', address: 'http://here' })
		);
		expect(takeLock(path, 'node')).toEqual({
			holder: { pid: process.ppid, script: 'node', address: 'http://here' }
		});
	});

	it('is not stopped by a killed run, by its process id in other hands, or by half a file', () => {
		for (const left of [
			JSON.stringify({ pid: 2 ** 22 - 3, script: 'node' }),
			JSON.stringify({ pid: process.ppid, script: 'a program that is not it' }),
			'{"pid": 12'
		]) {
			const path = join(newFolder(), 'lock');
			writeFileSync(path, left);
			const lock = takeLock(path, 'node');
			expect(lock).toMatchObject({ afterKill: true });
			expect(JSON.parse(readFileSync(path, 'utf8')).pid).toBe(process.pid);
		}
	});
});

describe('secrets', () => {
	it('are made once, each its own, readable by nobody else', () => {
		const state = newFolder();
		const first = secrets(state);
		expect(secrets(state)).toEqual(first);
		expect(new Set(Object.values(first)).size).toBe(Object.keys(first).length);
		expect(Buffer.from(first.HEDDLE_KEY!, 'base64')).toHaveLength(32);
		for (const name of Object.keys(first))
			expect(statSync(join(state, 'secrets', name)).mode & 0o777).toBe(0o600);
		expect(statSync(join(state, 'secrets')).mode & 0o777).toBe(0o700);
	});
});

describe('trouble in one line', () => {
	it('knows a full disk, a missing network and a closed folder from what programs say', () => {
		expect(explain(Object.assign(new Error('write'), { code: 'ENOSPC' }))).toContain(
			'disk is full'
		);
		expect(
			explain({ message: 'initdb: error: could not write to file "x": No space left on device' })
		).toContain('disk is full');
		expect(explain({ code: '53100', message: 'could not extend file' })).toContain('disk is full');
		expect(
			explain({ message: 'npm error code EAI_AGAIN\nnpm error request to https://registry failed' })
		).toContain('network');
		expect(explain({ message: "Temporary failure resolving 'deb.debian.org'" })).toContain(
			'network'
		);
		expect(explain(Object.assign(new Error('open'), { code: 'EACCES', path: '/x' }))).toContain(
			'/x'
		);
		expect(explain(new Error('a fault of our own'))).toBeNull();
	});
});

describe('children', () => {
	it('wait longer after each quick death, but never longer than half a minute', () => {
		expect([1, 2, 3, 4, 5, 6, 60].map(backOff)).toEqual([1, 2, 4, 8, 16, 30, 30]);
	});

	it('are started again after they die, and all are stopped at the end', async () => {
		const logs = newFolder();
		const said: string[] = [];
		const processes = new Processes({ logs, say: (line) => said.push(line) });
		const program = join(logs, 'program.mjs');
		writeFileSync(
			program,
			`console.log('ready'); console.log('pid', process.pid); setInterval(() => {}, 1000);`
		);
		const env = { PATH: process.env.PATH ?? '' };
		const pids = () =>
			[...readFileSync(join(logs, 'part.log'), 'utf8').matchAll(/pid (\d+)/g)].map((m) =>
				Number(m[1])
			);
		const until = async (true_: () => boolean) => {
			for (let i = 0; i < 400 && !true_(); i++) await new Promise((done) => setTimeout(done, 50));
			expect(true_()).toBe(true);
		};
		await processes.start({ name: 'part', args: [program], env });
		await until(() => pids().length === 1);
		process.kill(pids()[0]!, 'SIGKILL');
		await until(() => said.includes('part works again') && pids().length === 2);
		expect(said[0]).toBe('part stopped by itself (SIGKILL)');
		const second = pids()[1]!;
		expect(process.kill(second, 0)).toBe(true);
		await processes.stop();
		expect(() => process.kill(second, 0)).toThrow();
	});

	it('that cannot start say why', async () => {
		const logs = newFolder();
		const program = join(logs, 'program.mjs');
		writeFileSync(program, `console.error('ORIGIN is not set'); process.exit(1);`);
		const processes = new Processes({ logs, say: () => {} });
		await expect(
			processes.start({ name: 'part', args: [program], env: { PATH: process.env.PATH ?? '' } })
		).rejects.toThrow(/part did not start[\s\S]*ORIGIN is not set/);
	});
});

describe('results', () => {
	const result = (status: 'passed' | 'failed' | 'skipped') => ({
		phase: 'unit',
		file: 'a',
		title: 't',
		status,
		ms: 1
	});

	it('end in one line, and a skipped test counts as failed unless tests were picked', () => {
		const all = [result('passed'), result('passed'), result('failed'), result('skipped')];
		expect(tally(all, false).line).toBe('2 passed, 2 failed');
		expect(tally(all, true).line).toBe('2 passed, 1 failed');
	});

	it('are tied to requirements by the id at the start of a title, or of a part of it', () => {
		expect(idsIn('R-34: a thing')).toEqual(['R-34']);
		expect(idsIn('sign-in > R-21, R-22: throttled')).toEqual(['R-21', 'R-22']);
		expect(idsIn('sign-in › R-21: throttled')).toEqual(['R-21']);
		expect(idsIn('mentions R-34: in passing')).toEqual([]);
		expect(idsIn('R-34 without a colon')).toEqual([]);
	});

	it('are held against the whole list', () => {
		const rows = requirementsIn(
			readFileSync(join(import.meta.dirname, '../../tests/requirements.md'), 'utf8')
		);
		expect(rows.map(({ id }) => id)).toEqual(Array.from({ length: 92 }, (_, i) => `R-${i + 1}`));
		for (const { requirement, how } of rows) expect(requirement && how).toBeTruthy();
	});
});
