// PostgreSQL's server programs, and the system user they run as.
import { existsSync, readdirSync, readFileSync } from 'node:fs';
import { spawnSync } from 'node:child_process';
import { join } from 'node:path';
import { installPackages } from './debian.mjs';
import { Trouble } from './say.mjs';

export const oldestVersion = 15;

/** @typedef {{ bin: string, version: number }} Programs */

/** @param {string} bin @returns {Programs | null} */
function programsIn(bin) {
	if (!['initdb', 'pg_ctl', 'postgres'].every((name) => existsSync(join(bin, name)))) return null;
	const answer = spawnSync(join(bin, 'postgres'), ['--version'], { encoding: 'utf8', cwd: '/' });
	const version = Number(/ (\d+)/.exec(answer.stdout ?? '')?.[1]);
	return version ? { bin, version } : null;
}

/** Every usable set of server programs, newest first. @returns {Programs[]} */
export function findPrograms() {
	/** @type {string[]} */
	const places = [];
	for (const parent of ['/usr/lib/postgresql', '/usr/pgsql', '/opt/homebrew/opt', '/usr/local/opt'])
		if (existsSync(parent))
			for (const name of readdirSync(parent)) places.push(join(parent, name, 'bin'));
	places.push('/usr/local/pgsql/bin', ...(process.env.PATH ?? '').split(':').filter(Boolean));
	return [...new Set(places)]
		.map(programsIn)
		.filter((found) => found !== null)
		.sort((a, b) => b.version - a.version);
}

/**
 * The programs for a cluster: of its own major version when there is one, else the newest.
 * @param {string | null} dataFolder an existing cluster's data folder
 * @param {(line: string) => void} say
 * @returns {Promise<Programs>}
 */
export async function serverPrograms(dataFolder, say) {
	const versionFile = dataFolder && join(dataFolder, 'PG_VERSION');
	const made =
		versionFile && existsSync(versionFile) ? Number(readFileSync(versionFile, 'utf8')) : null;
	const pick = () =>
		findPrograms().find(({ version }) => (made ? version === made : version >= oldestVersion));
	const found = pick();
	if (found) return found;
	await installPackages([made ? `postgresql-${made}` : 'postgresql'], {
		say,
		why: `PostgreSQL ${made ?? `${oldestVersion} or newer`}`
	});
	const installed = pick();
	if (installed) return installed;
	throw new Trouble(
		made
			? `The data here were made by PostgreSQL ${made}, whose server programs are not on this machine. Install postgresql-${made} and start again; the data are whole.`
			: `Debian's packages gave no PostgreSQL ${oldestVersion} or newer. Install it and start again.`
	);
}

/**
 * The user the server runs as: null for ourselves; the server refuses to run as root, so root lends it another.
 * @returns {import('./commands.mjs').SystemUser | null}
 */
export function serverUser() {
	if (process.getuid?.() !== 0) return null;
	for (const name of ['postgres', 'nobody']) {
		const id = (/** @type {string} */ flag) =>
			Number(spawnSync('id', [flag, name], { encoding: 'utf8' }).stdout || NaN);
		const [uid, gid] = [id('-u'), id('-g')];
		if (uid > 0 && gid > 0) return { uid, gid };
	}
	throw new Trouble(
		'PostgreSQL does not run as root, and this machine has no user "postgres". Add one: useradd --system postgres'
	);
}
