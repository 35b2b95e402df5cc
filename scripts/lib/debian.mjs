// Installing what is missing from Debian's packages, when that is allowed.
import { existsSync, mkdirSync, readFileSync, writeFileSync } from 'node:fs';
import { execute, works } from './commands.mjs';
import { Trouble, explain } from './say.mjs';

const configFile = '/etc/postgresql-common/createcluster.conf';

/** The words before a command that needs the administrator: none for root, sudo when it asks nothing, else null. */
export function administrator() {
	if (process.getuid?.() === 0) return [];
	return works('sudo', ['-n', 'true']) ? ['sudo', '-n'] : null;
}

/**
 * @param {string[]} packages
 * @param {{ say: (line: string) => void, why: string }} options
 */
export async function installPackages(packages, { say, why }) {
	const command = `apt-get update && apt-get install -y --no-install-recommends ${packages.join(' ')}`;
	const prefix = existsSync('/usr/bin/apt-get') ? administrator() : null;
	if (!prefix)
		throw new Trouble(
			`${why} is missing (${packages.join(', ')}), and only the administrator may install it. Run this once, then start again:\n\n  sudo sh -c '${command}'\n`
		);
	const apt = async (/** @type {string[]} */ args) => {
		const [program, ...rest] = [
			...prefix,
			'env',
			'DEBIAN_FRONTEND=noninteractive',
			'apt-get',
			'-q',
			...args
		];
		const { status, output } = await execute(/** @type {string} */ (program), rest, { cwd: '/' });
		return { status, output };
	};
	say(`Installing ${packages.join(', ')} from Debian's packages`);
	await apt(['update']);
	const wanted = [...packages];
	if (packages.includes('postgresql')) {
		// Debian makes and starts a cluster of its own with the server package unless told not to beforehand.
		const common = await apt(['install', '-y', '--no-install-recommends', 'postgresql-common']);
		if (common.status === 0) await withoutDefaultCluster(prefix);
	}
	const { status, output } = await apt(['install', '-y', '--no-install-recommends', ...wanted]);
	if (status !== 0)
		throw new Trouble(
			(explain({ message: output }) ??
				`${why} could not be installed:\n${output.split('\n').slice(-6).join('\n')}`) +
				`\n(the command was: apt-get install ${packages.join(' ')})`
		);
}

/** @param {string[]} prefix */
async function withoutDefaultCluster(prefix) {
	const line = 'create_main_cluster = false';
	if (prefix.length === 0) {
		mkdirSync('/etc/postgresql-common', { recursive: true });
		const now = existsSync(configFile) ? readFileSync(configFile, 'utf8') : '';
		if (!/^\s*create_main_cluster\s*=\s*false/m.test(now))
			writeFileSync(configFile, now.replace(/^\s*create_main_cluster.*$/gm, '') + `\n${line}\n`);
		return;
	}
	await execute('sudo', [
		'-n',
		'sh',
		'-c',
		`grep -q '^${line}' ${configFile} || echo '${line}' >> ${configFile}`
	]);
}
