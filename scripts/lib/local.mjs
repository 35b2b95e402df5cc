// The local installation: cluster, database, stored files and keys under .heddle/.
import { existsSync, readdirSync, renameSync, rmSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { program } from './build.mjs';
import {
	clusterExists,
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
import { environmentFor } from './environment.mjs';
import { folder, readJson, root, writeJson } from './places.mjs';
import { anyFreePort, usualPorts } from './ports.mjs';
import { Trouble, explain, say } from './say.mjs';
import { secrets } from './secrets.mjs';

export const state = process.env.HEDDLE_STATE ?? join(root, '.heddle');
export const localBuild = {
	buildDir: process.env.HEDDLE_BUILD_DIR ?? 'build',
	kitDir: process.env.HEDDLE_KIT_DIR ?? '.svelte-kit'
};
export const startLock = join(state, 'start.lock');
const database = 'heddle';
const filling = 'heddle_filling';
const at = (/** @type {string} */ name) => join(state, name);

/** Stored files: the open area and the closed one. */
export const storedFiles = /** @type {const} */ (['files', 'closed-files']);
export const accountsFile = at('accounts.json');
const kindFile = at('kind.json');
const fillingMark = at('filling');

/** 'demo', 'empty' or 'restored': how the data here began; null before there are any. @returns {string | null} */
export const kindOfData = () => readJson(kindFile)?.kind ?? null;

/** @typedef {{ cluster: import('./cluster.mjs').Cluster, keys: Record<string, string> }} Local */

/** Stops a server that a killed run left behind, and with it whatever that run still had under way. */
export async function stopLeftover() {
	if (!clusterExists(state)) return;
	const cluster = await openCluster({ state, port: 0, passwords: {}, say });
	if (!runningServer(cluster)) return;
	say('An earlier run was killed and left its database running: stopping it first');
	await stopCluster(cluster);
}

/** The cluster, made when needed, running, with its roles. @param {number} port @returns {Promise<Local>} */
export async function startLocal(port) {
	const keys = secrets(state);
	const cluster = await openCluster({ state, port, passwords: keys, say });
	await startCluster(cluster);
	await ensureRoles(urls(cluster, keys, 'postgres').superUrl, keys);
	return { cluster, keys };
}

/**
 * For commands: the cluster as it runs now, or started for as long as the command lasts.
 * @template T
 * @param {(local: Local) => Promise<T>} work
 */
export async function withLocal(work) {
	folder(state, 0o711);
	const keys = secrets(state);
	const cluster = await openCluster({ state, port: await anyFreePort(), passwords: keys, say });
	const running = runningServer(cluster);
	if (running) return work({ cluster: { ...cluster, port: running.port }, keys });
	await startCluster(cluster);
	try {
		await ensureRoles(urls(cluster, keys, 'postgres').superUrl, keys);
		return await work({ cluster, keys });
	} finally {
		await stopCluster(cluster);
	}
}

/** @param {Local} local @param {string} [name] */
export const localUrls = ({ cluster, keys }, name = database) => urls(cluster, keys, name);

/** The address the web server has, or had when it last ran. */
const localOrigin = () =>
	process.env.ORIGIN ?? `http://127.0.0.1:${readJson(at('ports.json'))?.web ?? usualPorts.web}`;

/** Everything the local processes may be given; each gets its own part. @param {Local} local @param {string} [name] @param {string} [suffix] */
export function localEnvironment(local, name = database, suffix = '') {
	const all = localUrls(local, name);
	return {
		DATABASE_URL: all.appUrl,
		DATABASE_OWNER_URL: all.ownerUrl,
		DATABASE_UNMASKED_URL: all.unmaskedUrl,
		ORIGIN: localOrigin(),
		AUTH_SECRET: local.keys.AUTH_SECRET,
		HEDDLE_KEY: local.keys.HEDDLE_KEY,
		CLOSED_KEY: local.keys.CLOSED_KEY,
		STORAGE_DIR: at(`files${suffix}`),
		CLOSED_STORAGE_DIR: at(`closed-files${suffix}`)
	};
}

/**
 * Runs one command-line program to its end.
 * @param {import('./environment.mjs').Kind} kind
 * @param {string[]} args  the program's name and its arguments
 * @param {Record<string, string | undefined>} env
 * @param {(line: string) => void} [onLine]
 */
export function runProgram(kind, [name, ...args], env, onLine) {
	return execute(process.execPath, [program(localBuild.buildDir, String(name)), ...args], {
		cwd: root,
		env: environmentFor(kind, env, {
			...process.env,
			CLI_DIR: join(root, localBuild.buildDir, 'cli')
		}),
		onLine
	});
}

/** @param {Record<string, string | undefined>} env */
export async function migrate(env) {
	const { status, output } = await runProgram('migrate', ['migrate'], env);
	if (status !== 0) throw new Trouble(explain({ message: output }) ?? output.trim());
	const applied = output.split('\n').filter((line) => line.startsWith('applied '));
	if (applied.length > 0) say(`Migrations: ${applied.length} applied`);
}

/** @param {Local} local */
export const hasData = (local) => databaseExists(localUrls(local, 'postgres').superUrl, database);

/** Stored files without a database are never thrown away: somebody must decide. */
export function refuseStrayFiles() {
	if (existsSync(fillingMark)) return;
	const stray = storedFiles.filter(
		(name) => existsSync(at(name)) && readdirSync(at(name)).length > 0
	);
	if (stray.length > 0)
		throw new Trouble(
			`There are stored files in ${stray.map(at).join(' and ')} but no database that knows them. Nothing was touched. Restore a backup with \`npx heddle restore\` after moving them away, or empty everything with \`npm run reset\`.`
		);
}

/**
 * Makes the first data beside their final place and moves them there when whole: a run killed half-way leaves
 * no half-filled installation, and the next one begins again.
 * @param {Local} local
 * @param {'demo' | 'empty' | 'restored'} kind
 * @param {(place: { env: Record<string, string | undefined>, urls: import('./databases.mjs').Urls }) => Promise<unknown[] | null>} work
 *   fills the new database and folders; gives back the accounts to be shown
 */
export async function fill(local, kind, work) {
	const { superUrl } = localUrls(local, 'postgres');
	refuseStrayFiles();
	if (existsSync(fillingMark))
		say('The first data were not finished by an earlier run: making them again');
	writeFileSync(fillingMark, '');
	await dropDatabase(superUrl, filling);
	for (const name of [...storedFiles, ...storedFiles.map((name) => `${name}.filling`)])
		rmSync(at(name), { recursive: true, force: true });
	for (const name of storedFiles) folder(at(`${name}.filling`));
	await createDatabase(superUrl, filling);
	const accounts = await work({
		env: localEnvironment(local, filling, '.filling'),
		urls: localUrls(local, filling)
	});
	for (const name of storedFiles) renameSync(at(`${name}.filling`), at(name));
	if (accounts) writeJson(accountsFile, accounts);
	else rmSync(accountsFile, { force: true });
	writeJson(kindFile, { kind });
	await sql(superUrl, `alter database ${filling} rename to ${database}`);
	rmSync(fillingMark, { force: true });
}
