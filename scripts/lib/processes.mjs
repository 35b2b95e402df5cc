// Children that are started together, looked after, and stopped together.
import { spawn } from 'node:child_process';
import { createWriteStream, existsSync, renameSync, statSync } from 'node:fs';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { setTimeout as wait } from 'node:timers/promises';
import { folder, root } from './places.mjs';
import { Trouble, explain } from './say.mjs';

const leash = pathToFileURL(join(root, 'scripts/lib/leash.mjs')).href;

/** Seconds to wait before the next attempt after so many quick deaths. @param {number} deaths */
export const backOff = (deaths) => Math.min(30, 2 ** Math.max(0, deaths - 1));

/**
 * @typedef {object} Program
 * @property {string} name
 * @property {string[]} args              for node
 * @property {Record<string, string>} env
 * @property {() => Promise<boolean>} [answers]  it works when this says so; else when it prints `ready`
 */

/** A set of running children. */
export class Processes {
	/** @type {Map<string, import('node:child_process').ChildProcess>} */
	#running = new Map();
	#stopping = false;

	/** @param {{ logs: string | null, say: (line: string) => void }} options logs: a folder, or null to pass on what they print */
	constructor({ logs, say }) {
		this.logs = logs && folder(logs);
		this.say = say;
	}

	/** Starts a program and resolves when it works; from then on it is started again whenever it dies. @param {Program} program */
	async start(program) {
		const { child, tail } = await this.#launch(program);
		this.#watch(program, child, tail, 0);
	}

	/** @param {Program} program */
	async #launch({ name, args, env, answers }) {
		const { write, end, hint } = this.#record(name);
		// In a group of its own: Ctrl-C reaches us alone, and we stop everything in the right order.
		const child = spawn(process.execPath, ['--import', leash, ...args], {
			cwd: root,
			env,
			detached: true,
			stdio: ['ignore', 'pipe', 'pipe', 'ipc']
		});
		this.#running.set(name, child);
		/** @type {string[]} */
		const tail = [];
		let ready = false;
		let ended = false;
		const take = (/** @type {Buffer} */ chunk) => {
			write(chunk);
			for (const line of chunk.toString().split('\n')) {
				if (line.trim() === 'ready') ready = true;
				else if (line.trim()) tail.push(line);
			}
			tail.splice(0, tail.length - 15);
		};
		child.stdout?.on('data', take);
		child.stderr?.on('data', take);
		child.once('error', () => (ended = true));
		child.once('close', () => {
			ended = true;
			end();
		});
		for (let tries = 0; tries < 1200 && !ended; tries++) {
			if (answers ? await answers() : ready) return { child, tail };
			await wait(50);
		}
		if (!ended) child.kill('SIGKILL');
		this.#running.delete(name);
		const said = tail.join('\n');
		throw new Trouble(`${name} did not start${hint}.\n${explain({ message: said }) ?? said}`);
	}

	/** Where a program's output goes. @param {string} name */
	#record(name) {
		if (!this.logs)
			return {
				write: (/** @type {Buffer} */ chunk) => void process.stdout.write(chunk),
				end: () => {},
				hint: ''
			};
		const path = join(this.logs, `${name}.log`);
		if (existsSync(path) && statSync(path).size > 10e6) renameSync(path, `${path}.old`);
		const file = createWriteStream(path, { flags: 'a', mode: 0o600 });
		file.on('error', () => {}); // a full disk must not take the supervisor down
		return {
			write: (/** @type {Buffer} */ chunk) => void file.write(chunk),
			end: () => void file.end(),
			hint: ` (its whole log: ${path})`
		};
	}

	/** @param {Program} program @param {import('node:child_process').ChildProcess} child @param {string[]} tail @param {number} deaths */
	#watch(program, child, tail, deaths) {
		const since = performance.now();
		const onEnd = async (
			/** @type {number | null} */ status,
			/** @type {string | null} */ signal
		) => {
			this.#running.delete(program.name);
			if (this.#stopping) return;
			let count = performance.now() - since > 60_000 ? 1 : deaths + 1;
			const why = explain({ message: tail.join('\n') });
			this.say(
				`${program.name} stopped by itself (${signal ?? `status ${status}`})${why ? `: ${why}` : ''}`
			);
			while (!this.#stopping) {
				const seconds = backOff(count);
				this.say(`Starting ${program.name} again in ${seconds} s`);
				await wait(seconds * 1000);
				if (this.#stopping) return;
				try {
					const next = await this.#launch(program);
					this.say(`${program.name} works again`);
					return this.#watch(program, next.child, next.tail, count);
				} catch (error) {
					count++;
					this.say(
						error instanceof Trouble
							? /** @type {string} */ (error.message.split('\n')[0])
							: String(error)
					);
				}
			}
		};
		if (child.exitCode !== null || child.signalCode !== null)
			void onEnd(child.exitCode, child.signalCode);
		else child.once('close', onEnd);
	}

	/** Asks all of them to stop, waits, and ends those that do not listen. */
	async stop() {
		this.#stopping = true;
		const children = [...this.#running.values()];
		await Promise.all(
			children.map(async (child) => {
				if (child.exitCode !== null || child.signalCode !== null) return;
				const ended = new Promise((resolve) => child.once('exit', resolve));
				child.kill('SIGTERM');
				const late = setTimeout(() => child.kill('SIGKILL'), 15_000);
				await ended;
				clearTimeout(late);
			})
		);
	}
}

/** Whether an address answers with success. @param {string} url */
export async function answersAt(url) {
	try {
		const answer = await fetch(url, { signal: AbortSignal.timeout(2000) });
		await answer.arrayBuffer();
		return answer.ok;
	} catch {
		return false;
	}
}
