// `npm start`: everything Heddle needs on this machine, from nothing but Node; or, with DATABASE_URL set, Heddle's
// own processes alone.
import { existsSync } from 'node:fs';
import { join } from 'node:path';
import { setTimeout as wait } from 'node:timers/promises';
import { build, installDependencies, program } from './lib/build.mjs';
import { clusterExists, runningServer, startCluster, stopCluster } from './lib/cluster.mjs';
import { endRunning } from './lib/commands.mjs';
import { makeDemo } from './lib/demo.mjs';
import { environmentFor } from './lib/environment.mjs';
import {
	accountsFile,
	fill,
	hasData,
	kindOfData,
	localBuild,
	localEnvironment,
	migrate,
	runProgram,
	startLocal,
	startLock,
	state,
	stopLeftover
} from './lib/local.mjs';
import { takeLock } from './lib/lock.mjs';
import { folder, readJson, requireWritableRoot, root } from './lib/places.mjs';
import { choosePorts, isFree, usualPorts } from './lib/ports.mjs';
import { Processes, answersAt, backOff } from './lib/processes.mjs';
import { Trouble, print, run, say } from './lib/say.mjs';

const usage = `npm start                 starts Heddle here, with its demo on the first run
npm start -- --empty      starts without the demo and prints a set-up link for the first administrator
npm start -- --only web   with DATABASE_URL set: which of web, worker, look-worker to run (comma between)`;

/** @type {(() => Promise<void> | void)[]} undone in reverse */
const undo = [];
let stopping = false;

async function stopAll() {
	stopping = true;
	endRunning();
	for (const step of undo.reverse()) await Promise.resolve(step()).catch?.(() => {});
}

/** Ctrl-C may arrive twice (from the terminal and through npm): the second is the same wish. */
for (const signal of /** @type {const} */ (['SIGINT', 'SIGTERM', 'SIGHUP']))
	process.on(signal, async () => {
		if (stopping) return;
		print();
		say('Stopping');
		await stopAll();
		say('Stopped; everything is kept.');
		process.exit(0);
	});

await run(async () => {
	const args = process.argv.slice(2);
	if (args.includes('--help')) return print(usage);
	const unknown = args.filter(
		(arg, i) => !['--empty', '--only'].includes(arg) && args[i - 1] !== '--only'
	);
	if (unknown.length > 0) throw new Trouble(`${unknown.join(' ')} is not known here.\n\n${usage}`);
	if (Number(process.versions.node.split('.')[0]) < 20)
		throw new Trouble(`Heddle needs Node 20; this is ${process.version}.`);
	requireWritableRoot();
	if (existsSync(join(root, '.env'))) process.loadEnvFile(join(root, '.env'));

	folder(state, 0o711);
	const lock = takeLock(startLock, 'start.mjs');
	if ('holder' in lock)
		throw new Trouble(
			`Heddle already runs here${lock.holder.address ? `: ${lock.holder.address}` : ', and is still starting'} (process ${lock.holder.pid}). Ctrl-C in its window stops it.`
		);
	undo.push(lock.release);
	try {
		await installDependencies(say);
		await build({ ...localBuild, say });
		const address = process.env.DATABASE_URL
			? await startHosted(args)
			: await startHere(args, lock.afterKill);
		lock.tell(address);
	} catch (error) {
		const asked = stopping;
		await stopAll();
		if (asked) await new Promise(() => {}); // the signal's own handler says the last word
		throw error;
	}
});

/** Heddle's processes against a given database: nothing local, no demo. @param {string[]} args */
async function startHosted(args) {
	const env = process.env;
	const only = (args[args.indexOf('--only') + 1] ?? '').split(',');
	const wants = (/** @type {string} */ name) => !args.includes('--only') || only.includes(name);
	if (args.includes('--empty'))
		throw new Trouble(
			'--empty is for the local start; DATABASE_URL is set, so no demo is made anyway.'
		);
	const unset = ['ORIGIN', 'AUTH_SECRET', 'HEDDLE_KEY'].filter((name) => !env[name]);
	if (!env.STORAGE_DIR && !env.S3_BUCKET) unset.push('STORAGE_DIR or S3_BUCKET');
	if (unset.length > 0)
		throw new Trouble(
			`DATABASE_URL is set, so this is an installation of its own; it also needs ${unset.join(', ')} (see .env.example).`
		);
	if (env.DATABASE_OWNER_URL) await migrate(env);
	const processes = new Processes({ logs: null, say });
	undo.push(() => processes.stop());
	const port = env.PORT ?? '3000';
	const host = env.HOST ?? '0.0.0.0';
	const from = ['0.0.0.0', '::'].includes(host)
		? '127.0.0.1'
		: host.includes(':')
			? `[${host}]`
			: host;
	const cli = {
		...process.env,
		CLI_DIR: join(root, localBuild.buildDir, 'cli'),
		NODE_ENV: 'production'
	};
	if (wants('web')) {
		if (!(await isFree(Number(port), host)))
			throw new Trouble(`Port ${port} is taken by another program. Set PORT to a free one.`);
		await processes.start({
			name: 'web',
			args: [join(root, localBuild.buildDir, 'index.js')],
			env: environmentFor('web', env, { ...cli, PORT: port, HOST: host }),
			answers: () => answersAt(`http://${from}:${port}/healthz`)
		});
	}
	for (const name of /** @type {const} */ (['worker', 'look-worker'])) {
		if (!wants(name) || (name === 'look-worker' && !env.DATABASE_UNMASKED_URL)) continue;
		await processes.start({
			name,
			args: [program(localBuild.buildDir, name)],
			env: environmentFor(name, env, cli)
		});
	}
	say(
		`Heddle runs${wants('web') ? ` on port ${port} for ${env.ORIGIN}` : ''}. Ctrl-C or SIGTERM stops it.`
	);
	return env.ORIGIN ?? `http://${from}:${port}`;
}

/** Everything on this machine. @param {string[]} args @param {boolean} afterKill */
async function startHere(args, afterKill) {
	const empty = args.includes('--empty');
	await stopLeftover();
	if (afterKill) await oldPortsFree();
	const ports = await choosePorts({
		state,
		say,
		fixed: process.env.PORT ? { web: Number(process.env.PORT) } : {}
	});

	const fresh = !clusterExists(state);
	const local = await startLocal(ports.postgres);
	let database = true;
	undo.push(() => {
		database = false;
		return stopCluster(local.cluster);
	});
	if (!fresh) say('The database is up');

	const logs = join(state, 'logs');
	const processes = new Processes({ logs, say });
	undo.push(() => processes.stop());
	await processes.start({
		name: 'mail',
		args: ['scripts/fakes/mail.mjs'],
		env: environmentFor(
			'none',
			{},
			{
				...process.env,
				FAKE_SMTP_PORT: String(ports.smtp),
				FAKE_MAIL_PORT: String(ports.mail),
				FAKE_MAIL_DIR: join(state, 'mail')
			}
		)
	});
	await processes.start({
		name: 'identity-provider',
		args: ['scripts/fakes/oidc.mjs'],
		env: environmentFor(
			'none',
			{},
			{ ...process.env, FAKE_OIDC_PORT: String(ports.oidc), FAKE_OIDC_ACCOUNTS: accountsFile }
		)
	});

	const host = process.env.HOST ?? '127.0.0.1';
	const origin = process.env.ORIGIN ?? `http://127.0.0.1:${ports.web}`;
	const shared = {
		ORIGIN: origin,
		SMTP_URL: process.env.SMTP_URL ?? `smtp://127.0.0.1:${ports.smtp}`,
		MAIL_FROM: process.env.MAIL_FROM ?? 'Heddle <heddle@heddle.example>',
		OIDC_ISSUER: process.env.OIDC_ISSUER ?? `http://127.0.0.1:${ports.oidc}`,
		OIDC_CLIENT_ID: process.env.OIDC_CLIENT_ID ?? 'heddle',
		OIDC_CLIENT_SECRET: process.env.OIDC_CLIENT_SECRET ?? local.keys.OIDC_CLIENT_SECRET,
		LOG_LEVEL: process.env.LOG_LEVEL,
		IDLE_MINUTES: process.env.IDLE_MINUTES,
		TRAINING_BANNER: process.env.TRAINING_BANNER
	};

	if (!(await hasData(local))) {
		if (!empty) say('First run: making the demo data. This happens once.');
		await fill(local, empty ? 'empty' : 'demo', async ({ env }) => {
			await migrate(env);
			return empty ? null : makeDemo({ ...env, ...shared });
		});
	} else if (empty && kindOfData() === 'demo') {
		throw new Trouble(
			'There are demo data here already. `npm run reset` removes them; then `npm start -- --empty` begins with none.'
		);
	} else await migrate(localEnvironment(local));

	const env = { ...localEnvironment(local), ...shared };
	const cli = {
		...process.env,
		CLI_DIR: join(root, localBuild.buildDir, 'cli'),
		NODE_ENV: 'production'
	};
	const web = `http://${host === '0.0.0.0' ? '127.0.0.1' : host}:${ports.web}`;
	await processes.start({
		name: 'web',
		args: [join(root, localBuild.buildDir, 'index.js')],
		env: environmentFor('web', env, { ...cli, HOST: host, PORT: String(ports.web) }),
		answers: () => answersAt(`${web}/healthz`)
	});
	await Promise.all(
		/** @type {const} */ (['worker', 'look-worker']).map((name) =>
			processes.start({
				name,
				args: [program(localBuild.buildDir, name)],
				env: environmentFor(name, env, cli)
			})
		)
	);
	watchDatabase(local.cluster, () => database);

	say('Ready');
	print(
		`\n  Heddle      ${origin}\n  Mail        http://127.0.0.1:${ports.mail}   (every mail it sends is caught here)\n`
	);
	const accounts = readJson(accountsFile);
	if (accounts) printAccounts(accounts);
	else await printSetupLink(env);
	print('\n  Stop it with Ctrl-C; the data are kept. `npm run reset` empties it.\n');
	return origin;
}

/** A killed run's children stop by themselves within moments; their ports are then ours again. */
async function oldPortsFree() {
	const ports = readJson(join(state, 'ports.json')) ?? {};
	for (let tries = 0; tries < 100; tries++) {
		const free = await Promise.all(
			Object.keys(usualPorts).map((part) => !ports[part] || isFree(ports[part]))
		);
		if (free.every(Boolean)) return;
		await wait(100);
	}
}

/** Starts the database again when it dies. @param {import('./lib/cluster.mjs').Cluster} cluster @param {() => boolean} wanted */
async function watchDatabase(cluster, wanted) {
	for (let deaths = 0; ;) {
		await wait(2000);
		if (!wanted()) return;
		if (runningServer(cluster)) continue;
		deaths++;
		say(`The database stopped by itself; starting it again in ${backOff(deaths)} s`);
		await wait(backOff(deaths) * 1000);
		if (!wanted()) return;
		try {
			await startCluster(cluster);
			say('The database works again; every save that was acknowledged is there');
			deaths = 0;
		} catch (error) {
			say(error instanceof Error ? error.message : String(error));
		}
	}
}

/** @param {{ role: string, email: string, password: string, note?: string }[]} accounts */
function printAccounts(accounts) {
	const width = (/** @type {'role' | 'email' | 'password'} */ field) =>
		Math.max(...accounts.map((account) => account[field].length));
	const [role, email, password] = [width('role'), width('email'), width('password')];
	print('  Accounts of the demo (sign in with e-mail and password)');
	for (const account of accounts)
		print(
			`    ${account.role.padEnd(role)}  ${account.email.padEnd(email)}  ${account.password.padEnd(password)}  ${account.note ?? ''}`.trimEnd()
		);
}

/** @param {Record<string, string | undefined>} env */
async function printSetupLink(env) {
	const { status, output } = await runProgram('admin', ['admin', 'setup-link'], env);
	const link = /https?:\/\/\S+/.exec(output)?.[0];
	if (status === 0 && link)
		print(`  First administrator: open this link once (it expires)\n    ${link}`);
	else if (kindOfData() === 'empty' && !output.trim()) return;
	else print(`  ${output.trim().split('\n').at(-1) ?? ''}`);
}
