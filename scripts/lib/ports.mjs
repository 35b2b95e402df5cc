// Free ports, remembered from one start to the next.
import { createServer } from 'node:net';
import { join } from 'node:path';
import { readJson, writeJson } from './places.mjs';
import { Trouble } from './say.mjs';

/** @typedef {{ web: number, postgres: number, smtp: number, mail: number, oidc: number }} Ports */

/** @type {Ports} */
export const usualPorts = { web: 8470, postgres: 54870, smtp: 8471, mail: 8472, oidc: 8473 };

const names = {
	web: 'web',
	postgres: 'database',
	smtp: 'mail (SMTP)',
	mail: 'mail page',
	oidc: 'identity provider'
};

/** @param {number} port @param {string} [host] @returns {Promise<boolean>} */
export function isFree(port, host = '127.0.0.1') {
	return new Promise((resolve) => {
		const server = createServer();
		server.once('error', () => resolve(false));
		server.listen({ port, host, exclusive: true }, () => server.close(() => resolve(true)));
	});
}

/** A port nobody uses now, chosen by the system. @returns {Promise<number>} */
export function anyFreePort() {
	return new Promise((resolve, reject) => {
		const server = createServer();
		server.once('error', reject);
		server.listen(0, '127.0.0.1', () => {
			const address = server.address();
			const port = typeof address === 'object' && address ? address.port : 0;
			server.close(() => resolve(port));
		});
	});
}

/**
 * The first free port at or after `wanted`, never one of `taken`.
 * @param {number} wanted
 * @param {Set<number>} taken
 * @param {(port: number) => Promise<boolean>} free
 */
export async function firstFree(wanted, taken, free) {
	for (let port = wanted; port < Math.min(wanted + 200, 65536); port++)
		if (!taken.has(port) && (await free(port))) return port;
	throw new Trouble(`No free port between ${wanted} and ${wanted + 199}.`);
}

/**
 * One free port for each part. A port that is taken is named and another chosen, except one that was asked
 * for by name (`fixed`): then nothing is guessed.
 * @param {{ state: string, fixed?: Partial<Ports>, say: (line: string) => void, free?: (port: number) => Promise<boolean> }} options
 * @returns {Promise<Ports>}
 */
export async function choosePorts({ state, fixed = {}, say, free = isFree }) {
	const file = join(state, 'ports.json');
	const saved = readJson(file) ?? {};
	/** @type {Set<number>} */
	const taken = new Set();
	// One part's neighbour must not push the others along, so that addresses stay what they were.
	const wish = (/** @type {keyof Ports} */ part) =>
		fixed[part] ?? (Number.isInteger(saved[part]) ? saved[part] : usualPorts[part]);
	const chosen = { ...usualPorts };
	const parts = /** @type {(keyof Ports)[]} */ (Object.keys(usualPorts));
	for (const part of parts) {
		const asked = fixed[part];
		if (asked !== undefined) {
			if (taken.has(asked) || !(await free(asked)))
				throw new Trouble(
					`Port ${asked}, asked for the ${names[part]}, is taken by another program. Stop that program or set ${part === 'web' ? 'PORT' : `${part.toUpperCase()}_PORT`} to a free one.`
				);
			chosen[part] = asked;
		} else {
			const wanted = wish(part);
			const others = parts.filter((other) => other !== part).map(wish);
			chosen[part] =
				!taken.has(wanted) && (await free(wanted))
					? wanted
					: await firstFree(wanted + 1, new Set([...taken, ...others]), free);
			if (chosen[part] !== wanted)
				say(
					`Port ${wanted} (${names[part]}) is taken by another program: using ${chosen[part]}.` +
						(part === 'web' ? ' Set PORT to choose one yourself.' : '')
				);
		}
		taken.add(chosen[part]);
	}
	writeJson(file, chosen, 0o644);
	return chosen;
}
