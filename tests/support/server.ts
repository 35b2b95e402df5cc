import { join } from 'node:path';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { anyFreePort } from '../../scripts/lib/ports.mjs';
import { Processes, answersAt } from '../../scripts/lib/processes.mjs';
import { startMail } from '../../scripts/fakes/mail.mjs';
import { startOidc } from '../../scripts/fakes/oidc.mjs';
import { build, program } from '../../scripts/lib/build.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { readFileSync, readdirSync } from 'node:fs';
import { freshDatabase, type FreshDatabase } from './database';

type Mail = Awaited<ReturnType<typeof startMail>>;
export type CaughtMail = Mail['messages'][number];

export interface RunningServer {
	origin: string;
	database: FreshDatabase;
	/** The mail catcher; its `messages` grow as mail arrives. */
	mail: Mail;
	/** The environment every part was given its share of. */
	env: Record<string, string>;
	/** Everything the processes have printed so far. */
	logs(): string;
	/** A request to the server with a relative address. */
	fetch(path: string, init?: RequestInit): Promise<Response>;
	/** The first mail to an address that `matches`, waited for. */
	mailTo(address: string, matches?: (mail: CaughtMail) => boolean): Promise<CaughtMail>;
	stop(): Promise<void>;
}

export interface ServerOptions {
	template?: 'migrated' | 'demo';
	/** An existing database instead of a fresh one; it is then not dropped. */
	database?: FreshDatabase;
	worker?: boolean;
	lookWorker?: boolean;
	/** Starts an identity provider too. */
	oidc?: boolean;
	/** Further variables for all parts. */
	env?: Record<string, string>;
}

/** The production build on a free port, with a database, files and a mail catcher of its own. */
export async function startServer(options: ServerOptions = {}): Promise<RunningServer> {
	const { template = 'migrated', worker = false, lookWorker = false, oidc = false } = options;
	// The test script has built already; a test file run by itself may be the first to need it.
	if (!process.env.HEDDLE_TEST_CLUSTER) await build({ ...testBuild, say: console.error });
	const database = options.database ?? (await freshDatabase({ template }));
	const mail = await startMail();
	const identity = oidc ? await startOidc() : null;
	const port = await anyFreePort();
	const origin = `http://127.0.0.1:${port}`;
	const env: Record<string, string> = {
		...database.env,
		ORIGIN: origin,
		SMTP_URL: mail.smtpUrl,
		MAIL_FROM: 'Heddle <heddle@heddle.test>',
		...(identity
			? { OIDC_ISSUER: identity.issuer, OIDC_CLIENT_ID: 'heddle', OIDC_CLIENT_SECRET: 'practice' }
			: {}),
		...options.env
	};
	const logs = join(database.files, 'logs');
	const processes = new Processes({ logs, say: () => {} });
	const surroundings = {
		...process.env,
		...options.env,
		HOST: '127.0.0.1',
		PORT: String(port),
		NODE_ENV: 'production',
		CLI_DIR: join(root, testBuild.buildDir, 'cli'),
		// Vitest's own settings are not the server's.
		NODE_OPTIONS: ''
	};
	const stop = async () => {
		await processes.stop();
		await mail.stop();
		await identity?.stop();
		if (!options.database) await database.drop();
	};
	try {
		await processes.start({
			name: 'web',
			args: [join(root, testBuild.buildDir, 'index.js')],
			env: environmentFor('web', env, surroundings),
			answers: () => answersAt(`${origin}/readyz`)
		});
		for (const [wanted, name] of [
			[worker, 'worker'],
			[lookWorker, 'look-worker']
		] as const)
			if (wanted)
				await processes.start({
					name,
					args: [program(testBuild.buildDir, name)],
					env: environmentFor(name, env, surroundings)
				});
	} catch (error) {
		await stop();
		throw error;
	}
	return {
		origin,
		database,
		mail,
		env,
		logs: () =>
			readdirSync(logs)
				.map((file) => readFileSync(join(logs, file), 'utf8'))
				.join('\n'),
		fetch: (path, init) => fetch(new URL(path, origin), init),
		mailTo: async (address, matches = () => true) => {
			for (let tries = 0; tries < 600; tries++) {
				const found = mail.messages.find((m) => m.to.includes(address) && matches(m));
				if (found) return found;
				await new Promise((resolve) => setTimeout(resolve, 50));
			}
			throw new Error(`No such mail to ${address} arrived. Logs:\n${readLogsBriefly(logs)}`);
		},
		stop
	};
}

const readLogsBriefly = (folder: string) =>
	readdirSync(folder)
		.map((file) => readFileSync(join(folder, file), 'utf8').slice(-2000))
		.join('\n');
