// Generated once, one file of mode 600 each; never printed.
import { randomBytes } from 'node:crypto';
import {
	chmodSync,
	closeSync,
	existsSync,
	fsyncSync,
	openSync,
	readFileSync,
	renameSync,
	writeSync
} from 'node:fs';
import { join } from 'node:path';
import { folder } from './places.mjs';

/** @type {Record<string, () => string>} */
const makers = {
	postgres: () => randomBytes(24).toString('hex'),
	heddle_owner: () => randomBytes(24).toString('hex'),
	heddle_app: () => randomBytes(24).toString('hex'),
	heddle_unmasked: () => randomBytes(24).toString('hex'),
	AUTH_SECRET: () => randomBytes(33).toString('base64url'),
	HEDDLE_KEY: () => randomBytes(32).toString('base64'),
	CLOSED_KEY: () => randomBytes(32).toString('base64'),
	OIDC_CLIENT_SECRET: () => randomBytes(24).toString('hex')
};

/** What must travel with a backup, because stored data cannot be read without it. */
export const keyNames = ['AUTH_SECRET', 'HEDDLE_KEY', 'CLOSED_KEY'];
/** The database roles' passwords; another cluster has its own. */
export const passwordNames = ['postgres', 'heddle_owner', 'heddle_app', 'heddle_unmasked'];

/** Written beside and renamed, so that a killed start never leaves half a secret. @param {string} path @param {string} value */
export function writeSecret(path, value) {
	const beside = `${path}.new`;
	const file = openSync(beside, 'w', 0o600);
	try {
		writeSync(file, value + '\n');
		fsyncSync(file);
	} finally {
		closeSync(file);
	}
	renameSync(beside, path);
}

/** @param {string} state @returns {Record<string, string>} */
export function secrets(state) {
	const place = folder(join(state, 'secrets'));
	chmodSync(place, 0o700);
	/** @type {Record<string, string>} */
	const all = {};
	for (const [name, make] of Object.entries(makers)) {
		const path = join(place, name);
		if (!existsSync(path)) writeSecret(path, make());
		all[name] = readFileSync(path, 'utf8').trim();
	}
	return all;
}
