#!/usr/bin/env node
// The one command-line face of Heddle. With DATABASE_URL set it works on that installation, else on the local one.
import { spawnSync } from 'node:child_process';
import { existsSync } from 'node:fs';
import { join, resolve } from 'node:path';
import { areasOf } from '../scripts/lib/areas.mjs';
import {
	backup,
	keyIn,
	restoreDatabase,
	storedIn,
	verifiedManifest
} from '../scripts/lib/backup.mjs';
import { build, installDependencies, program } from '../scripts/lib/build.mjs';
import { clusterExists } from '../scripts/lib/cluster.mjs';
import { makeDemo } from '../scripts/lib/demo.mjs';
import { environmentFor } from '../scripts/lib/environment.mjs';
import {
	fill,
	hasData,
	localBuild,
	localEnvironment,
	localUrls,
	migrate,
	refuseStrayFiles,
	runProgram,
	startLock,
	state,
	storedFiles,
	withLocal
} from '../scripts/lib/local.mjs';
import { holderOf } from '../scripts/lib/lock.mjs';
import { root } from '../scripts/lib/places.mjs';
import { Trouble, print, run, say } from '../scripts/lib/say.mjs';
import { keyNames, writeSecret } from '../scripts/lib/secrets.mjs';

const usage = `heddle migrate            brings the database's structure up to date
heddle demo               fills an empty installation with the demo
heddle backup FOLDER      database, stored files and keys into a new folder
heddle restore FOLDER     the same back, into an empty installation, whole or not at all
heddle verify-audit       checks the audit trail's chain; status 1 when it is broken
heddle verify-signatures  holds each signature against its record; status 1 when one is damaged
heddle seal               seals the audit trail up to now
heddle allocation-list --study CODE [--email ADDRESS] [--out FILE]
                          for the independent statistician: makes the list again from its seed and compares
heddle setup-link         a one-time link for the first administrator
heddle fit --plan PLAN DATA [--table] [--limits]
                          fits the plan to a CSV file and prints the result as JSON, or as a table
heddle boundaries --plan PLAN [--table]
                          the boundaries of a monitoring plan, and what a look says, as JSON or as a table
heddle design --plan PLAN [--table]
                          sample size and power, by formula and by simulation, as JSON or as a table
heddle help               this

fit, boundaries and design need no installation. The others work on the one that DATABASE_URL names (see .env.example),
else on the local one in .heddle/.`;

/** A backup's folder holds keys: whoever reads it can read everything. */
const keepSafe = 'The folder holds the keys: keep it where only you can read it.';

/** @type {Record<string, (args: string[]) => Promise<number | void>>} */
const commands = {
	migrate: () => (hosted() ? withBuild(() => migrate(process.env)) : onData((env) => migrate(env))),

	async demo() {
		if (hosted()) {
			await withBuild(async () => {
				await migrate(process.env);
				printAccounts(await makeDemo(process.env));
			});
			return;
		}
		notWhileStarting();
		await withBuild(() =>
			withLocal(async (local) => {
				if (await hasData(local))
					throw new Trouble('There are data here already. `npm run reset` removes them.');
				await fill(local, 'demo', async ({ env }) => {
					await migrate(env);
					const accounts = await makeDemo(env);
					printAccounts(accounts);
					return accounts;
				});
			})
		);
	},

	async backup([folder]) {
		if (!folder) throw new Trouble(`Name a new folder for it.\n\n${usage}`);
		const now = new Date();
		const target = resolve(folder);
		const manifest = hosted()
			? await backup({
					folder: target,
					databaseUrl: required('BACKUP_DATABASE_URL'),
					areas: areasOf(process.env),
					keys: process.env,
					now
				})
			: await onData((env, urls) =>
					backup({
						folder: target,
						databaseUrl: urls.superUrl,
						areas: areasOf(env),
						keys: env,
						now
					})
				);
		const rows = Object.values(manifest.counts).reduce((sum, n) => sum + n, 0);
		print(
			`Saved in ${target}: ${rows} rows of ${Object.keys(manifest.counts).length} tables, ${storedIn(manifest, [...storedFiles]).length} stored files, ${keyNames.length} keys.\n${keepSafe}`
		);
	},

	async restore([folder]) {
		if (!folder) throw new Trouble(`Name the folder of the backup.\n\n${usage}`);
		const source = resolve(folder);
		const manifest = await verifiedManifest(source);
		if (hosted()) await restoreHosted(source, manifest);
		else await restoreHere(source, manifest);
		print(`Restored what was saved on ${manifest.made}.`);
		return commands['verify-audit']?.([]);
	},

	'verify-audit': () => admin('verify-audit'),
	'verify-signatures': () => admin('verify-signatures'),
	seal: () => admin('seal'),
	'setup-link': () => admin('setup-link'),
	'allocation-list': (args) => allocationList(args),

	fit: (args) => engine('fit', args),
	boundaries: (args) => engine('boundaries', args),
	design: (args) => engine('design', args),

	help: async () => print(usage)
};

/** What needs no installation, and says nothing on standard output but its answer. */
const alone = [commands.fit, commands.boundaries, commands.design];

/** @param {string} source @param {import('../scripts/lib/backup.mjs').Manifest} manifest */
async function restoreHere(source, manifest) {
	notWhileStarting();
	await withLocal(async (local) => {
		if (await hasData(local))
			throw new Trouble(
				'There are data here already, so nothing was restored. `npm run reset` removes them.'
			);
		refuseStrayFiles();
		await fill(local, 'restored', async ({ env, urls }) => {
			await restoreDatabase({ folder: source, manifest, databaseUrl: urls.superUrl });
			for (const area of areasOf(env)) await area.fillFrom(join(source, area.name));
			for (const name of keyNames) writeSecret(join(state, 'secrets', name), keyIn(source, name));
			return null;
		});
	});
}

/** @param {string} source @param {import('../scripts/lib/backup.mjs').Manifest} manifest */
async function restoreHosted(source, manifest) {
	const databaseUrl = required('RESTORE_DATABASE_URL');
	const other = keyNames.filter((name) => required(name) !== keyIn(source, name));
	if (other.length > 0)
		throw new Trouble(
			`${other.join(', ')} in the environment ${other.length === 1 ? 'is' : 'are'} not the backup's: what is restored could not be read. Set what stands in ${join(source, 'secrets')}.`
		);
	const areas = areasOf(process.env);
	for (const area of areas)
		if (!(await area.isEmpty()))
			throw new Trouble(`The place for ${area.name} is not empty. Nothing was restored.`);
	await restoreDatabase({ folder: source, manifest, databaseUrl });
	for (const area of areas) await area.fillFrom(join(source, area.name));
}

/** One of the administrator's own commands. @param {string} command */
function admin(command) {
	const ask = async (/** @type {Record<string, string | undefined>} */ env) => {
		const { status, output } = await runProgram('admin', ['admin', command], env);
		print(output.trim());
		return status === 0 ? 0 : 1;
	};
	return withBuild(() => (hosted() ? ask(process.env) : onData(ask)));
}

/** Asks who it is and answers on the same terminal. @param {string[]} args */
function allocationList(args) {
	const ask = async (/** @type {Record<string, string | undefined>} */ env) =>
		spawnSync(process.execPath, [program(localBuild.buildDir, 'allocation-list'), ...args], {
			stdio: 'inherit',
			env: environmentFor('look-worker', env)
		}).status ?? 1;
	return withBuild(() => (hosted() ? ask(process.env) : onData(ask)));
}

/**
 * A program of the statistics, which reads files and prints an answer.
 * @param {string} name @param {string[]} args
 */
async function engine(name, args) {
	await build({ ...localBuild, say: sayAside, web: false });
	const { status } = spawnSync(process.execPath, [program(localBuild.buildDir, name), ...args], {
		stdio: 'inherit'
	});
	return status ?? 1;
}

/** To a person only: a program that reads standard error is told of trouble and nothing else. @param {string} line */
function sayAside(line) {
	if (process.stderr.isTTY) process.stderr.write(`${line}\n`);
}

const hosted = () => Boolean(process.env.DATABASE_URL);

/** @param {string} name */
function required(name) {
	const value = process.env[name];
	if (!value) throw new Trouble(`${name} is not set (see .env.example).`);
	return value;
}

function notWhileStarting() {
	const holder = holderOf(startLock);
	if (holder)
		throw new Trouble(`Heddle runs here now (process ${holder.pid}). Stop it with Ctrl-C first.`);
}

/** @template T @param {() => Promise<T>} work */
async function withBuild(work) {
	await build({ ...localBuild, say, web: false });
	return work();
}

/**
 * On the local installation's data, which must be there.
 * @template T
 * @param {(env: Record<string, string | undefined>, urls: import('../scripts/lib/databases.mjs').Urls) => Promise<T>} work
 */
async function onData(work) {
	const none = new Trouble('There are no data here yet: `npm start` makes them.');
	if (!clusterExists(state)) throw none;
	return withLocal(async (local) => {
		if (!(await hasData(local))) throw none;
		return work(localEnvironment(local), localUrls(local));
	});
}

/** @param {unknown[]} accounts */
function printAccounts(accounts) {
	for (const {
		role,
		email,
		password
	} of /** @type {{ role: string, email: string, password: string }[]} */ (accounts))
		print(`${role}  ${email}  ${password}`);
}

await run(async () => {
	const [name = 'help', ...args] = process.argv.slice(2);
	const command = Object.hasOwn(commands, name) ? commands[name] : undefined;
	if (!command) throw new Trouble(`${name} is not known here.\n\n${usage}`);
	if (command === commands.help) return command(args);
	if (alone.includes(command)) {
		await installDependencies(sayAside);
		return command(args);
	}
	if (existsSync(join(root, '.env'))) process.loadEnvFile(join(root, '.env'));
	await installDependencies(say);
	return command(args);
});
