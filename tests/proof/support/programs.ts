import { spawn } from 'node:child_process';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { program } from '../../../scripts/lib/build.mjs';
import { environmentFor, type Kind } from '../../../scripts/lib/environment.mjs';
import { root } from '../../../scripts/lib/places.mjs';
import { testBuild } from '../../../scripts/lib/test-cluster.mjs';
import { until } from './processes';

/** Ends the program when the test's own process is gone. */
const leash = pathToFileURL(join(root, 'scripts/lib/leash.mjs')).href;

export interface Running {
	pid: number;
	/** What it printed so far. */
	printed(): string;
	kill(signal: 'SIGTERM' | 'SIGKILL'): void;
	/** Its status, or the signal that ended it. */
	ended: Promise<number | string>;
}

/** A worker started as `npm start` does, but watched over by nobody: when it dies it stays dead. */
export async function startProgram(
	kind: Kind & ('worker' | 'look-worker'),
	env: Record<string, string>
): Promise<Running> {
	const child = spawn(process.execPath, ['--import', leash, program(testBuild.buildDir, kind)], {
		cwd: root,
		env: environmentFor(kind, env, {
			...process.env,
			NODE_ENV: 'production',
			CLI_DIR: join(root, testBuild.buildDir, 'cli'),
			NODE_OPTIONS: ''
		}),
		stdio: ['ignore', 'pipe', 'pipe', 'ipc']
	});
	let text = '';
	child.stdout?.on('data', (chunk: Buffer) => (text += chunk.toString()));
	child.stderr?.on('data', (chunk: Buffer) => (text += chunk.toString()));
	let over = false;
	const ended = new Promise<number | string>((resolve) =>
		child.once('close', (status, signal) => {
			over = true;
			resolve(status ?? signal ?? 'gone');
		})
	);
	await until(() => over || /^ready$/m.test(text), `${kind} to be ready`);
	if (over) throw new Error(`${kind} did not start:\n${text}`);
	return {
		pid: child.pid as number,
		printed: () => text,
		kill: (signal) => void child.kill(signal),
		ended
	};
}
