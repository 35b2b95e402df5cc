import { existsSync, readFileSync, readdirSync } from 'node:fs';
import { setTimeout as wait } from 'node:timers/promises';

/** Processes of this machine, as /proc shows them. */
interface Seen {
	pid: number;
	parent: number;
	command: string;
}

function everything(): Seen[] {
	return readdirSync('/proc')
		.filter((name) => /^\d+$/.test(name))
		.flatMap((name) => {
			try {
				const stat = readFileSync(`/proc/${name}/stat`, 'utf8');
				// The name in brackets may hold anything; what follows it is in a fixed order.
				const [state, parent] = stat.slice(stat.lastIndexOf(')') + 2).split(' ');
				if (state === 'Z') return [];
				const command = readFileSync(`/proc/${name}/cmdline`, 'utf8').replaceAll('\0', ' ');
				return [{ pid: Number(name), parent: Number(parent), command }];
			} catch {
				return []; // it ended meanwhile
			}
		});
}

export const childrenOf = (parent: number): number[] =>
	everything()
		.filter((each) => each.parent === parent)
		.map(({ pid }) => pid);

/** Our own child whose command holds the text; null while there is none. */
export const ownChild = (text: string): number | null =>
	everything().find((each) => each.parent === process.pid && each.command.includes(text))?.pid ??
	null;

/** Kills them all at once, and waits until they are gone and buried: a dead process keeps its number until then. */
export async function killAtOnce(pids: readonly number[]): Promise<void> {
	for (const pid of pids)
		try {
			process.kill(pid, 'SIGKILL');
		} catch {
			// It ended by itself a moment ago.
		}
	await until(
		() => !pids.some((pid) => existsSync(`/proc/${pid}`)),
		'the killed processes to be gone',
		60
	);
}

export async function until(
	holds: () => boolean | Promise<boolean>,
	what: string,
	seconds = 60
): Promise<void> {
	const end = performance.now() + seconds * 1000;
	while (performance.now() < end) {
		if (await holds()) return;
		await wait(50);
	}
	throw new Error(`Waited ${seconds} s in vain for ${what}`);
}
