// A private PostgreSQL cluster on loopback, made whole or not at all.
import {
	chmodSync,
	chownSync,
	existsSync,
	mkdirSync,
	readFileSync,
	readdirSync,
	renameSync,
	rmSync,
	statSync,
	writeFileSync
} from 'node:fs';
import { spawn, spawnSync } from 'node:child_process';
import { join } from 'node:path';
import { execute } from './commands.mjs';
import { folder, outsideFolder, root } from './places.mjs';
import { serverPrograms, serverUser } from './postgres.mjs';
import { Trouble, explain } from './say.mjs';

/**
 * @typedef {object} Cluster
 * @property {string} home     the folder that belongs to the server's user
 * @property {string} data     the data folder
 * @property {string} bin
 * @property {number} port
 * @property {boolean} throwAway  durability is given up for speed: tests only
 * @property {import('./commands.mjs').SystemUser | null} user
 */

/** Where the cluster of this state folder lies: in it, unless the server's user cannot get there. @param {string} state */
export function clusterHome(state) {
	const note = join(state, 'cluster-is-in');
	return existsSync(note) ? readFileSync(note, 'utf8').trim() : join(state, 'cluster');
}

/** A finished cluster is there. @param {string} state */
export const clusterExists = (state) => existsSync(join(clusterHome(state), 'data', 'PG_VERSION'));

/** @param {string} state @param {import('./commands.mjs').SystemUser | null} user */
function makeHome(state, user) {
	const own = (/** @type {string} */ path) => {
		mkdirSync(path, { recursive: true, mode: 0o700 });
		chmodSync(path, 0o700);
		if (user) chownSync(path, user.uid, user.gid);
		return path;
	};
	const home = own(clusterHome(state));
	const reaches = (/** @type {string} */ path) =>
		!user || spawnSync('test', ['-w', path], { ...user, cwd: '/' }).status === 0;
	if (reaches(home)) return home;
	// A closed parent folder (say /root): the server's user cannot pass through it, whatever lies below.
	const name = state.slice(state.lastIndexOf('/') + 1);
	folder(outsideFolder(), 0o711);
	chmodSync(outsideFolder(), 0o711);
	const outside = own(join(outsideFolder(), name));
	if (!reaches(outside))
		throw new Trouble(`The database's user can reach neither ${home} nor ${outside}.`);
	rmSync(home, { recursive: true, force: true });
	writeFileSync(join(state, 'cluster-is-in'), outside + '\n');
	return outside;
}

/**
 * The cluster of a state folder, made when it is not there; not yet started.
 * It is made as `data.new` and renamed when whole, so that a killed run can never pass for a finished one,
 * and a finished one is never taken for half-made.
 * @param {{ state: string, port: number, passwords: Record<string, string>, throwAway?: boolean, say: (line: string) => void }} options
 * @returns {Promise<Cluster>}
 */
export async function openCluster({ state, port, passwords, throwAway = false, say }) {
	folder(state, 0o711);
	chmodSync(state, 0o711);
	const existing = clusterExists(state) ? join(clusterHome(state), 'data') : null;
	const { bin, version } = await serverPrograms(existing, say);
	const user = serverUser();
	const home = makeHome(state, user);
	const data = join(home, 'data');
	const cluster = { home, data, bin, port, throwAway, user };
	if (existing) return cluster;
	if (existsSync(data))
		throw new Trouble(
			`${data} is there but is no PostgreSQL cluster (PG_VERSION is missing). Nothing was touched: put it back from a backup, or move it away.`
		);
	// A name of its own: the programs of a killed run may live on for a moment and write into theirs.
	const fresh = `${data}.new-${process.pid}`;
	for (const name of readdirSync(home).filter((entry) => entry.startsWith('data.new'))) {
		say('An earlier run was stopped while it made the database cluster: making it afresh');
		rmSync(join(home, name), { recursive: true, force: true, maxRetries: 5 });
	}
	say(`Making a private PostgreSQL ${version} cluster in ${home.replace(`${root}/`, '')}`);
	// initdb cannot read the password from a child's stdin, which is a socket.
	const passwordFile = join(home, 'pw');
	writeFileSync(passwordFile, passwords.postgres + '\n', { mode: 0o600 });
	if (user) chownSync(passwordFile, user.uid, user.gid);
	const made = await execute(
		join(bin, 'initdb'),
		[
			'-D',
			fresh,
			'-U',
			'postgres',
			'-A',
			'scram-sha-256',
			`--pwfile=${passwordFile}`,
			'-E',
			'UTF8',
			'--locale=C.UTF-8',
			'--no-instructions',
			...(throwAway ? ['--no-sync'] : [])
		],
		{ as: user, cwd: '/' }
	);
	rmSync(passwordFile, { force: true });
	if (made.status !== 0)
		throw new Trouble(
			explain({ message: made.output }) ??
				`The database cluster could not be made:\n${made.output.trim()}`
		);
	renameSync(fresh, data);
	return cluster;
}

/** What the server is told at its start. @param {Cluster} cluster */
function settings({ port, throwAway }) {
	const list = {
		port,
		listen_addresses: '127.0.0.1',
		unix_socket_directories: "''",
		timezone: 'UTC',
		log_timezone: 'UTC',
		max_connections: 120,
		...(throwAway
			? {
					fsync: 'off',
					synchronous_commit: 'off',
					full_page_writes: 'off',
					autovacuum: 'off',
					wal_level: 'minimal',
					max_wal_senders: 0,
					shared_buffers: '256MB'
				}
			: {})
	};
	return Object.entries(list)
		.flatMap(([name, value]) => ['-c', `${name}=${value}`])
		.join(' ');
}

/** The running server's process id and port, read from its own lock file. @param {Cluster} cluster */
export function runningServer({ data }) {
	try {
		const lines = readFileSync(join(data, 'postmaster.pid'), 'utf8').split('\n');
		const pid = Number(lines[0]);
		process.kill(pid, 0);
		if (existsSync('/proc/self')) {
			const command = readFileSync(`/proc/${pid}/cmdline`, 'utf8');
			if (!command.includes('postgres') || !command.includes(data)) return null;
		}
		return { pid, port: Number(lines[3]) };
	} catch {
		return null;
	}
}

/** @param {Cluster} cluster */
export async function startCluster(cluster) {
	const { home, data, bin, port, user } = cluster;
	const log = join(home, 'log');
	if (existsSync(log) && statSync(log).size > 20e6) renameSync(log, `${log}.old`);
	const before = existsSync(log) ? statSync(log).size : 0;
	// The server must not inherit our pipes, or whoever reads them would wait for ever.
	const status = await new Promise((resolve) => {
		const child = spawn(
			join(bin, 'pg_ctl'),
			['-D', data, '-l', log, '-w', '-t', '300', '-o', settings(cluster), 'start'],
			{ ...(user ?? {}), cwd: '/', stdio: 'ignore' }
		);
		child.on('error', () => resolve(127));
		child.on('close', resolve);
	});
	if (status === 0) return;
	const said = existsSync(log) ? readFileSync(log, 'utf8').slice(before) : '';
	if (/address already in use|could not create any TCP\/IP sockets/i.test(said))
		throw new Trouble(
			`Port ${port} (database) was taken by another program just now. Start again: another will be chosen.`
		);
	throw new Trouble(
		explain({ message: said }) ??
			`The database did not start; the data are untouched.\n${said.trim().split('\n').slice(-12).join('\n')}`.trim()
	);
}

/** Stops it and waits; does nothing when it is not running. @param {Cluster} cluster @param {'fast' | 'immediate'} [mode] */
export async function stopCluster(cluster, mode = 'fast') {
	if (!existsSync(join(cluster.data, 'postmaster.pid'))) return;
	await execute(
		join(cluster.bin, 'pg_ctl'),
		['-D', cluster.data, '-m', mode, '-w', '-t', '120', 'stop'],
		{ as: cluster.user, cwd: '/' }
	);
}
