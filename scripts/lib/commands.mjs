// Running other programs to their end.
import { spawn, spawnSync } from 'node:child_process';

/** @typedef {{ uid: number, gid: number }} SystemUser */
/** @typedef {{ status: number, output: string }} Outcome */

/** @type {Set<import('node:child_process').ChildProcess>} */
const running = new Set();

/** Ends whatever `execute` is running now: the caller is being stopped. */
export function endRunning() {
	for (const child of running) child.kill('SIGTERM');
}

/**
 * @param {string} command
 * @param {string[]} args
 * @param {{ as?: SystemUser | null, cwd?: string, env?: NodeJS.ProcessEnv, onLine?: (line: string) => void }} [options]
 * @returns {Promise<Outcome>} status 127 when the program is not there
 */
export function execute(command, args, { as, cwd, env, onLine } = {}) {
	return new Promise((resolve) => {
		const child = spawn(command, args, {
			cwd,
			env: env ?? process.env,
			stdio: ['ignore', 'pipe', 'pipe'],
			...(as ?? {})
		});
		running.add(child);
		let output = '';
		let rest = '';
		const take = (/** @type {Buffer} */ chunk) => {
			const text = chunk.toString();
			output = (output + text).slice(-200_000);
			if (!onLine) return;
			const lines = (rest + text).split('\n');
			rest = lines.pop() ?? '';
			lines.forEach(onLine);
		};
		child.stdout.on('data', take);
		child.stderr.on('data', take);
		child.on('error', (error) => {
			running.delete(child);
			resolve({ status: 127, output: String(error.message) });
		});
		child.on('close', (status, signal) => {
			running.delete(child);
			if (rest && onLine) onLine(rest);
			resolve({ status: status ?? (signal ? 128 : 1), output });
		});
	});
}

/** Whether a program answers at all. @param {string} command @param {string[]} [args] */
export function works(command, args = ['--version']) {
	return spawnSync(command, args, { stdio: 'ignore' }).status === 0;
}
