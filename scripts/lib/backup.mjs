// Database, stored files and keys in one folder, with a fingerprint of each file; and back, whole or not at all.
import { createHash } from 'node:crypto';
import {
	createReadStream,
	existsSync,
	mkdirSync,
	readdirSync,
	readFileSync,
	renameSync,
	rmSync,
	statSync
} from 'node:fs';
import { basename, dirname, join, relative } from 'node:path';
import { createRequire } from 'node:module';
import { pipeline } from 'node:stream/promises';
import { execute } from './commands.mjs';
import { sql } from './databases.mjs';
import { readJson, root, writeJson } from './places.mjs';
import { keyNames, writeSecret } from './secrets.mjs';
import { Trouble, explain } from './say.mjs';

/** @typedef {{ path: string, size: number, sha256: string }} Entry */
/**
 * @typedef {object} Manifest
 * @property {'heddle-backup'} what
 * @property {1} format
 * @property {string} version   of Heddle
 * @property {string} made
 * @property {number} postgres  major version
 * @property {Record<string, number>} counts  rows of each table at the backup's instant
 * @property {Entry[]} files
 */

const manifestName = 'manifest.json';
const dumpName = 'database.dump';

/** @param {string} path @returns {Promise<string>} */
export async function sha256(path) {
	const hash = createHash('sha256');
	await pipeline(createReadStream(path), hash);
	return hash.digest('hex');
}

/** Every file below a folder, by relative path. @param {string} folder @returns {string[]} */
function filesBelow(folder) {
	if (!existsSync(folder)) return [];
	return readdirSync(folder, { recursive: true })
		.map(String)
		.filter((name) => statSync(join(folder, name)).isFile())
		.sort();
}

/** @param {string} folder @returns {Promise<Entry[]>} */
export async function entriesOf(folder) {
	const entries = [];
	for (const path of filesBelow(folder))
		if (path !== manifestName)
			entries.push({
				path,
				size: statSync(join(folder, path)).size,
				sha256: await sha256(join(folder, path))
			});
	return entries;
}

/**
 * The manifest of a backup whose every file is there, unchanged, and nothing beside them.
 * @param {string} folder
 * @returns {Promise<Manifest>}
 */
export async function verifiedManifest(folder) {
	const manifest = readJson(join(folder, manifestName));
	if (manifest?.what !== 'heddle-backup')
		throw new Trouble(
			`${folder} is no backup made by Heddle, or one that was never finished (its ${manifestName} is missing).`
		);
	if (manifest.format !== 1)
		throw new Trouble(
			`This backup was made by a newer Heddle (${manifest.version}); restore it with that one.`
		);
	const there = new Map((await entriesOf(folder)).map((entry) => [entry.path, entry]));
	const wrong = [];
	for (const { path, size, sha256: sum } of /** @type {Entry[]} */ (manifest.files)) {
		const entry = there.get(path);
		if (!entry) wrong.push(`${path} is missing`);
		else if (entry.size !== size || entry.sha256 !== sum)
			wrong.push(`${path} is not what was saved`);
		there.delete(path);
	}
	for (const path of there.keys()) wrong.push(`${path} does not belong to it`);
	if (wrong.length > 0)
		throw new Trouble(
			`The backup is damaged, so nothing was restored:\n  ${wrong.slice(0, 10).join('\n  ')}`
		);
	return manifest;
}

/** A PostgreSQL client program, of the newest version there is. @param {string} name */
function clientProgram(name) {
	const places = existsSync('/usr/lib/postgresql')
		? readdirSync('/usr/lib/postgresql').sort((a, b) => Number(b) - Number(a))
		: [];
	return (
		places
			.map((version) => join('/usr/lib/postgresql', version, 'bin', name))
			.find((path) => existsSync(path)) ?? name
	);
}

/** Runs a client program; the password never stands on a command line. @param {string} name @param {string} url @param {string[]} args */
async function client(name, url, args) {
	const { hostname, port, username, password, pathname, searchParams } = new URL(url);
	const { status, output } = await execute(clientProgram(name), args, {
		env: {
			...process.env,
			PGHOST: hostname,
			PGPORT: port || '5432',
			PGUSER: decodeURIComponent(username),
			PGPASSWORD: decodeURIComponent(password),
			PGDATABASE: pathname.slice(1),
			...(searchParams.get('sslmode') ? { PGSSLMODE: String(searchParams.get('sslmode')) } : {})
		}
	});
	if (status === 127)
		throw new Trouble(`${name} is not on this machine. Install postgresql-client and try again.`);
	if (status !== 0)
		throw new Trouble(
			explain({ message: output }) ??
				`${name} failed:\n${output.trim().split('\n').slice(-8).join('\n')}`
		);
}

const tables = `select format('%I.%I', schemaname, tablename) as name from pg_tables
	where schemaname not in ('pg_catalog', 'information_schema') order by 1`;

/** Rows of each table. @param {(statement: string) => Promise<any[]>} query @returns {Promise<Record<string, number>>} */
async function countRows(query) {
	/** @type {Record<string, number>} */
	const counts = {};
	for (const { name } of await query(tables)) {
		const [row] = await query(`select count(*)::float8 as n from ${name}`);
		counts[name] = row.n;
	}
	return counts;
}

/** @param {string} url a role that row-level security does not hold back @returns {Promise<Record<string, number>>} */
export const countsIn = (url) =>
	countRows(async (statement) => (await sql(url, statement))[0] ?? []);

/**
 * @typedef {object} Area  a place of stored files
 * @property {string} name
 * @property {(folder: string) => Promise<void>} copyTo
 */

/**
 * @param {{ folder: string, databaseUrl: string, areas: Area[], keys: Record<string, string | undefined>, now: Date }} options
 * @returns {Promise<Manifest>}
 */
export async function backup({ folder: target, databaseUrl, areas, keys, now }) {
	if (existsSync(target) && readdirSync(target).length > 0)
		throw new Trouble(`${target} is not empty. Name a new folder for each backup.`);
	const missing = keyNames.filter((name) => !keys[name]);
	if (missing.length > 0)
		throw new Trouble(`A backup without its keys cannot be read again: set ${missing.join(', ')}.`);
	const beside = join(dirname(target), `.${basename(target)}.partial`);
	rmSync(beside, { recursive: true, force: true });
	mkdirSync(beside, { recursive: true, mode: 0o700 });
	try {
		const { Client } = /** @type {typeof import('pg')} */ (
			createRequire(join(root, 'package.json'))('pg')
		);
		const db = new Client({ connectionString: databaseUrl });
		db.on('error', () => {});
		await db.connect();
		/** @type {Record<string, number>} */
		let counts;
		let version;
		try {
			const query = async (/** @type {string} */ statement) => (await db.query(statement)).rows;
			const [role] = await query(
				'select rolsuper or rolbypassrls as all from pg_roles where rolname = current_user'
			);
			if (!role?.all)
				throw new Trouble(
					'Row-level security would leave rows out of this backup. Use a role with BYPASSRLS (BACKUP_DATABASE_URL).'
				);
			// The dump and the counts see one and the same instant.
			await query('begin isolation level repeatable read read only');
			const [{ snapshot }] = await query('select pg_export_snapshot() as snapshot');
			version = Number((await query('show server_version_num'))[0].server_version_num);
			await client('pg_dump', databaseUrl, [
				'--format=custom',
				`--snapshot=${snapshot}`,
				'--file',
				join(beside, dumpName),
				'--no-password'
			]);
			counts = await countRows(query);
		} finally {
			await db.end().catch(() => {});
		}
		// Files after the database: a file is stored before the row that names it is committed.
		for (const { name, copyTo } of areas) {
			mkdirSync(join(beside, name), { mode: 0o700 });
			await copyTo(join(beside, name));
		}
		mkdirSync(join(beside, 'secrets'), { mode: 0o700 });
		for (const name of keyNames)
			writeSecret(join(beside, 'secrets', name), /** @type {string} */ (keys[name]));
		/** @type {Manifest} */
		const manifest = {
			what: 'heddle-backup',
			format: 1,
			version: readJson(join(root, 'package.json')).version,
			made: now.toISOString(),
			postgres: Math.floor(version / 10_000),
			counts,
			files: await entriesOf(beside)
		};
		writeJson(join(beside, manifestName), manifest);
		if (existsSync(target)) rmSync(target, { recursive: true });
		renameSync(beside, target);
		return manifest;
	} catch (error) {
		rmSync(beside, { recursive: true, force: true });
		throw error;
	}
}

/**
 * Fills an empty database from a verified backup, in one transaction, and compares the rows of every table.
 * @param {{ folder: string, manifest: Manifest, databaseUrl: string }} options
 */
export async function restoreDatabase({ folder: source, manifest, databaseUrl }) {
	const [there] = await sql(databaseUrl, tables);
	if (there && there.length > 0)
		throw new Trouble('The database to restore into is not empty. Nothing was changed.');
	await client('pg_restore', databaseUrl, [
		'--exit-on-error',
		'--single-transaction',
		'--no-password',
		`--dbname=${new URL(databaseUrl).pathname.slice(1)}`,
		join(source, dumpName)
	]);
	const counts = await countsIn(databaseUrl);
	const different = Object.keys({ ...counts, ...manifest.counts }).filter(
		(name) => counts[name] !== manifest.counts[name]
	);
	if (different.length > 0)
		throw new Trouble(
			`After restoring, these tables do not hold what was saved: ${different.map((name) => `${name} (${counts[name] ?? 'none'} of ${manifest.counts[name] ?? 'none'})`).join(', ')}.`
		);
}

/** @param {string} folder @param {string} name */
export const keyIn = (folder, name) => readFileSync(join(folder, 'secrets', name), 'utf8').trim();

/** Names of files in an area, for the last line. @param {Manifest} manifest @param {string[]} areas */
export const storedIn = (manifest, areas) =>
	manifest.files.filter(({ path }) => areas.some((area) => !relative(area, path).startsWith('..')));
