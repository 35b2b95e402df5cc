// Stored files as a backup sees them: a folder, or a bucket of an object store.
import {
	cpSync,
	createWriteStream,
	existsSync,
	mkdirSync,
	readdirSync,
	readFileSync
} from 'node:fs';
import { createRequire } from 'node:module';
import { dirname, join, normalize } from 'node:path';
import { pipeline } from 'node:stream/promises';
import { root } from './places.mjs';
import { Trouble } from './say.mjs';

/**
 * @typedef {object} Place
 * @property {string} name
 * @property {() => Promise<boolean>} isEmpty
 * @property {(folder: string) => Promise<void>} copyTo
 * @property {(folder: string) => Promise<void>} fillFrom
 */

/** @param {string} name @param {string} path @returns {Place} */
export const folderArea = (name, path) => ({
	name,
	isEmpty: async () => !existsSync(path) || readdirSync(path).length === 0,
	copyTo: async (target) => {
		if (existsSync(path)) cpSync(path, target, { recursive: true, preserveTimestamps: true });
	},
	fillFrom: async (source) => {
		mkdirSync(path, { recursive: true, mode: 0o700 });
		cpSync(source, path, { recursive: true, preserveTimestamps: true });
	}
});

/** @param {string} name @param {Record<string, string | undefined>} env @returns {Place} */
export function bucketArea(name, env) {
	const { S3Client, ListObjectsV2Command, GetObjectCommand, PutObjectCommand } =
		/** @type {typeof import('@aws-sdk/client-s3')} */ (
			createRequire(join(root, 'package.json'))('@aws-sdk/client-s3')
		);
	const Bucket = env.S3_BUCKET;
	const client = new S3Client({
		region: env.S3_REGION ?? 'us-east-1',
		...(env.S3_ENDPOINT ? { endpoint: env.S3_ENDPOINT, forcePathStyle: true } : {}),
		credentials: { accessKeyId: env.S3_ACCESS_KEY ?? '', secretAccessKey: env.S3_SECRET_KEY ?? '' },
		// Other stores than the original keep the framing of these checksums inside the object.
		requestChecksumCalculation: 'WHEN_REQUIRED',
		responseChecksumValidation: 'WHEN_REQUIRED'
	});
	async function* keys() {
		/** @type {string | undefined} */
		let ContinuationToken;
		do {
			const page = await client.send(new ListObjectsV2Command({ Bucket, ContinuationToken }));
			for (const { Key } of page.Contents ?? []) if (Key) yield Key;
			ContinuationToken = page.NextContinuationToken;
		} while (ContinuationToken);
	}
	return {
		name,
		isEmpty: async () => (await keys().next()).done === true,
		copyTo: async (target) => {
			for await (const Key of keys()) {
				const path = join(target, Key);
				if (normalize(path) !== path || !path.startsWith(target))
					throw new Trouble(`The stored file ${Key} has a name that cannot be kept in a folder.`);
				mkdirSync(dirname(path), { recursive: true, mode: 0o700 });
				const { Body } = await client.send(new GetObjectCommand({ Bucket, Key }));
				await pipeline(
					/** @type {import('node:stream').Readable} */ (Body),
					createWriteStream(path, { mode: 0o600 })
				);
			}
		},
		fillFrom: async (source) => {
			for (const entry of readdirSync(source, { recursive: true, withFileTypes: true })) {
				if (!entry.isFile()) continue;
				const path = join(entry.parentPath, entry.name);
				await client.send(
					new PutObjectCommand({
						Bucket,
						Key: path.slice(source.length + 1),
						Body: readFileSync(path)
					})
				);
			}
		}
	};
}

/** The places of stored files that an environment names. @param {Record<string, string | undefined>} env @returns {Place[]} */
export function areasOf(env) {
	const open = env.S3_BUCKET
		? bucketArea('files', env)
		: env.STORAGE_DIR
			? folderArea('files', env.STORAGE_DIR)
			: null;
	if (!open) throw new Trouble('Set STORAGE_DIR or S3_BUCKET, so that the stored files are known.');
	if (!env.CLOSED_STORAGE_DIR)
		throw new Trouble(
			'Set CLOSED_STORAGE_DIR (the look worker knows it), so that closed reports are known.'
		);
	return [open, folderArea('closed-files', env.CLOSED_STORAGE_DIR)];
}
