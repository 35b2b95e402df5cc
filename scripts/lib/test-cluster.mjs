// The throw-away cluster of the tests, with a migrated template and, when asked, one that holds the demo.
import { existsSync, readdirSync, rmSync } from 'node:fs';
import { setTimeout as wait } from 'node:timers/promises';
import { join } from 'node:path';
import { build, program, stampOf } from './build.mjs';
import {
	clusterExists,
	clusterHome,
	openCluster,
	runningServer,
	startCluster,
	stopCluster
} from './cluster.mjs';
import { execute } from './commands.mjs';
import {
	createDatabase,
	databaseExists,
	dropDatabase,
	ensureRoles,
	sql,
	urls
} from './databases.mjs';
import { takeLock } from './lock.mjs';
import { folder, readJson, root, writeJson } from './places.mjs';
import { anyFreePort } from './ports.mjs';
import { Trouble } from './say.mjs';
import { secrets } from './secrets.mjs';

export const testBuild = { buildDir: 'build-test', kitDir: '.svelte-kit-test' };
const migrated = 'heddle_template';
const demo = 'heddle_demo';

/**
 * What tests need to know; also written to cluster.json, so that a single test file can be run by itself.
 * @typedef {{ state: string, port: number, passwords: Record<string, string>, buildDir: string, demo: boolean, accounts: unknown[] | null }} TestCluster
 */

/** @param {string} name */
export const testState = (name) => join(root, `.heddle-${name}`);

/** Everything a Heddle process reads from its environment, for one test database. @param {TestCluster} cluster @param {string} database @param {string} files */
export function testEnvironment(cluster, database, files) {
	const all = urls(cluster, cluster.passwords, database);
	return {
		DATABASE_URL: all.appUrl,
		DATABASE_OWNER_URL: all.ownerUrl,
		DATABASE_UNMASKED_URL: all.unmaskedUrl,
		AUTH_SECRET: /** @type {string} */ (cluster.passwords.AUTH_SECRET),
		HEDDLE_KEY: /** @type {string} */ (cluster.passwords.HEDDLE_KEY),
		CLOSED_KEY: /** @type {string} */ (cluster.passwords.CLOSED_KEY),
		STORAGE_DIR: join(files, 'open'),
		CLOSED_STORAGE_DIR: join(files, 'closed'),
		LOG_LEVEL: 'info'
	};
}

/**
 * A running cluster with an up-to-date template; quick when both are there already.
 * @param {{ name?: string, throwAway?: boolean, withDemo?: boolean, say?: (line: string) => void }} [options]
 * @returns {Promise<TestCluster>}
 */
export async function testCluster({
	name = 'test',
	throwAway = true,
	withDemo = false,
	say = () => {}
} = {}) {
	const state = folder(testState(name), 0o711);
	// Several test files started by hand at once: one makes it, the others wait.
	const lockFile = join(state, 'cluster.lock');
	let lock = takeLock(lockFile, process.argv[1] ?? 'node');
	for (let tries = 0; 'holder' in lock && tries < 1200; tries++) {
		await wait(250);
		lock = takeLock(lockFile, process.argv[1] ?? 'node');
	}
	if ('holder' in lock)
		throw new Trouble(`Another run (process ${lock.holder.pid}) keeps the test cluster busy.`);
	try {
		return await prepare(state, { throwAway, withDemo, say });
	} finally {
		lock.release();
	}
}

/** @param {string} state @param {{ throwAway: boolean, withDemo: boolean, say: (line: string) => void }} options @returns {Promise<TestCluster>} */
async function prepare(state, { throwAway, withDemo, say }) {
	const passwords = secrets(state);
	const cluster = await openCluster({
		state,
		port: await anyFreePort(),
		passwords,
		throwAway,
		say
	});
	const running = runningServer(cluster);
	if (running) cluster.port = running.port;
	else await startCluster(cluster);
	const { superUrl } = urls(cluster, passwords, 'postgres');
	await ensureRoles(superUrl, passwords);
	const file = join(state, 'cluster.json');
	const before = readJson(file) ?? {};
	const stamp = stampOf(root, [
		'migrations',
		'src/lib/server/db',
		'src/lib/server/jobs/queue.ts',
		'package-lock.json'
	]);
	if (before.stamp !== stamp || !(await databaseExists(superUrl, migrated))) {
		await build({ ...testBuild, say, web: false });
		await dropDatabase(superUrl, `${migrated}_new`);
		await createDatabase(superUrl, `${migrated}_new`);
		await runProgram(
			'migrate',
			testEnvironment(
				{ ...cluster, state, passwords, buildDir: testBuild.buildDir, demo: false, accounts: null },
				`${migrated}_new`,
				state
			)
		);
		await dropDatabase(superUrl, migrated);
		await sql(superUrl, `alter database ${migrated}_new rename to ${migrated}`);
	}
	/** @type {TestCluster & { stamp: string, demoStamp?: string }} */
	const info = {
		state,
		port: cluster.port,
		passwords,
		buildDir: testBuild.buildDir,
		demo: false,
		accounts: null,
		stamp
	};
	const demoThere = before.stamp === stamp && before.demo && (await databaseExists(superUrl, demo));
	if (demoThere)
		Object.assign(info, { demo: true, accounts: before.accounts, demoStamp: before.demoStamp });
	if (withDemo) {
		await build({ ...testBuild, say, web: false });
		const demoStamp = stampOf(
			root,
			['src/cli', 'src/lib', 'migrations', 'templates'],
			(path) => !path.includes('.test.')
		);
		if (
			existsSync(program(testBuild.buildDir, 'demo')) &&
			!(demoThere && before.demoStamp === demoStamp)
		) {
			say('Making the demo template');
			const files = demoFiles(info);
			rmSync(files, { recursive: true, force: true });
			await dropDatabase(superUrl, demo);
			await createDatabase(superUrl, demo, { template: migrated });
			folder(join(files, 'open'));
			folder(join(files, 'closed'));
			const output = await runProgram('demo', {
				...testEnvironment(info, demo, files),
				ORIGIN: 'http://127.0.0.1'
			});
			Object.assign(info, { demo: true, accounts: accountsIn(output), demoStamp });
		}
	}
	writeJson(file, info);
	return info;
}

/** Stored files that belong to the demo template. @param {{ state: string }} cluster */
export const demoFiles = ({ state }) => join(state, 'demo-files');

/** The closing line of the demo program. @param {string} output @returns {unknown[]} */
export function accountsIn(output) {
	const line = output.split('\n').findLast((text) => text.startsWith('accounts '));
	if (!line) throw new Trouble('The demo ended without naming its accounts.');
	return JSON.parse(line.slice('accounts '.length));
}

/** @param {string} name @param {Record<string, string>} env */
async function runProgram(name, env) {
	const { status, output } = await execute(process.execPath, [program(testBuild.buildDir, name)], {
		cwd: root,
		env: { ...process.env, ...env }
	});
	if (status !== 0)
		throw new Trouble(`${name} failed:\n${output.trim().split('\n').slice(-30).join('\n')}`);
	return output;
}

/** Stops the cluster and removes it with all it holds. @param {string} [name] */
export async function removeTestCluster(name = 'test') {
	const state = testState(name);
	if (!existsSync(state)) return;
	if (clusterExists(state)) {
		const cluster = await openCluster({ state, port: 0, passwords: secrets(state), say: () => {} });
		await stopCluster(cluster, 'immediate');
	}
	rmSync(clusterHome(state), { recursive: true, force: true });
	for (const entry of readdirSync(state))
		rmSync(join(state, entry), { recursive: true, force: true });
	rmSync(state, { recursive: true, force: true });
}
