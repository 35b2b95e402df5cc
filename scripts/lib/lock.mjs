// One run at a time per state folder; a killed run leaves nothing that stops the next.
import { closeSync, openSync, readFileSync, rmSync, writeSync } from 'node:fs';
import { readJson, writeJson } from './places.mjs';

/** @typedef {{ pid: number, script: string, address?: string }} Holder */

/** The holder is alive and is what it says it is: a process id alone may have been given to another program. @param {Holder | null} holder */
export function isAlive(holder) {
	if (!holder?.pid || holder.pid === process.pid) return false;
	try {
		process.kill(holder.pid, 0);
	} catch (error) {
		if (/** @type {NodeJS.ErrnoException} */ (error).code !== 'EPERM') return false;
	}
	try {
		return readFileSync(`/proc/${holder.pid}/cmdline`, 'utf8').includes(holder.script);
	} catch {
		return true;
	}
}

/** @param {string} path @returns {Holder | null} whoever holds the lock now */
export function holderOf(path) {
	const holder = readJson(path);
	return isAlive(holder) ? holder : null;
}

/**
 * @param {string} path
 * @param {string} script
 * @returns {{ holder: Holder } | { release: () => void, tell: (address: string) => void, afterKill: boolean }} afterKill: an earlier run ended without giving its lock back
 */
export function takeLock(path, script) {
	const mine = { pid: process.pid, script };
	let afterKill = false;
	for (let attempt = 0; attempt < 3; attempt++) {
		try {
			const file = openSync(path, 'wx', 0o644);
			writeSync(file, JSON.stringify(mine));
			closeSync(file);
			return {
				afterKill,
				release: () => rmSync(path, { force: true }),
				tell: (address) => writeJson(path, { ...mine, address }, 0o644)
			};
		} catch (error) {
			if (/** @type {NodeJS.ErrnoException} */ (error).code !== 'EEXIST') throw error;
		}
		const holder = holderOf(path);
		if (holder) return { holder };
		afterKill = true;
		rmSync(path, { force: true });
	}
	return { holder: { pid: 0, script } };
}
