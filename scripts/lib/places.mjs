// Where things lie. State is kept in the project folder unless it cannot be reached by the database's user.
import { createHash } from 'node:crypto';
import {
	accessSync,
	constants,
	existsSync,
	mkdirSync,
	readFileSync,
	statSync,
	writeFileSync
} from 'node:fs';
import { dirname, join } from 'node:path';
import { fileURLToPath } from 'node:url';
import { Trouble } from './say.mjs';

export const root = dirname(dirname(dirname(fileURLToPath(import.meta.url))));

/** @param {string} path @param {number} [mode] */
export function folder(path, mode = 0o700) {
	mkdirSync(path, { recursive: true, mode });
	return path;
}

/** Stops early and clearly when the project folder is not ours to write in. */
export function requireWritableRoot() {
	try {
		accessSync(root, constants.W_OK);
	} catch {
		const owner = statSync(root).uid;
		throw new Trouble(
			`The folder ${root} belongs to another user (uid ${owner}) and you may not write in it.\n` +
				`Run this as that user, or work in a copy of your own: cp -r ${root} ~/heddle`
		);
	}
}

/** @param {string} path @returns {any} the parsed file, or null when it is missing or half-written */
export function readJson(path) {
	try {
		return JSON.parse(readFileSync(path, 'utf8'));
	} catch {
		return null;
	}
}

/** @param {string} path @param {unknown} value @param {number} [mode] */
export function writeJson(path, value, mode = 0o600) {
	writeFileSync(path, JSON.stringify(value, null, '\t') + '\n', { mode });
}

/** The folder outside the project used when the database's user cannot reach the project. */
export function outsideFolder() {
	const name = createHash('sha256').update(root).digest('hex').slice(0, 12);
	return join(existsSync('/var/lib') ? '/var/lib/heddle' : '/var/heddle', name);
}
