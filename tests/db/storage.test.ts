import { spawn } from 'node:child_process';
import { createHash, randomBytes } from 'node:crypto';
import {
	existsSync,
	mkdirSync,
	mkdtempSync,
	readFileSync,
	readdirSync,
	rmSync,
	writeFileSync
} from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import S3rver from 's3rver';
import { build as bundle } from 'vite';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { bucketArea } from '../../scripts/lib/areas.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { anyFreePort } from '../../scripts/lib/ports.mjs';
import { seal, unseal } from '../../src/lib/server/storage/closed';
import { folderStorage } from '../../src/lib/server/storage/folder';
import { s3Storage } from '../../src/lib/server/storage/s3';
import type { Storage } from '../../src/lib/server/storage/storage';

const place = mkdtempSync(join(tmpdir(), 'heddle-storage-'));
const bucket = 'heddle-test';
let objects: S3rver;
let endpoint: string;

beforeAll(async () => {
	const port = await anyFreePort();
	mkdirSync(join(place, 'objects'));
	objects = new S3rver({
		port,
		address: '127.0.0.1',
		silent: true,
		directory: join(place, 'objects'),
		configureBuckets: [bucket, 'heddle-second'].map((name) => ({ name, configs: [] }))
	});
	await objects.run();
	endpoint = `http://127.0.0.1:${port}`;
});
afterAll(async () => {
	await objects?.close();
	rmSync(place, { recursive: true, force: true });
});

const object = () =>
	s3Storage({
		endpoint,
		bucket,
		region: 'us-east-1',
		accessKey: 'S3RVER',
		secretKey: 'S3RVER'
	});

const contents: [string, () => Buffer][] = [
	['nothing', () => Buffer.alloc(0)],
	['one byte', () => Buffer.from([0])],
	['text with line ends and no UTF-8', () => Buffer.from('a\r\nb\0\xff\xfe', 'latin1')],
	[
		'what could be taken for a frame of a chunked upload',
		() => Buffer.from('5;chunk-signature=0\r\nhello\r\n0\r\n\r\n')
	],
	['forty million bytes', () => randomBytes(40_000_000)]
];

const drivers: [string, () => Storage][] = [
	['a folder', () => folderStorage(join(place, 'folder'))],
	['an object store', () => object()]
];

describe.each(drivers)('in %s', (_, driver) => {
	test.each(contents)('%s comes back byte for byte', async (name, make) => {
		const bytes = make();
		const key = `some/place/${createHash('sha256').update(name).digest('hex').slice(0, 12)}.bin`;
		await driver().put(key, bytes, 'application/octet-stream');
		expect((await driver().get(key)).equals(bytes)).toBe(true);
	});

	test('a later file takes the place of an earlier one, and others stay', async () => {
		const storage = driver();
		await storage.put('a/one.txt', Buffer.from('first'), 'text/plain');
		await storage.put('a/two.txt', Buffer.from('other'), 'text/plain');
		await storage.put('a/one.txt', Buffer.from('second, and longer'), 'text/plain');
		expect((await storage.get('a/one.txt')).toString()).toBe('second, and longer');
		expect((await storage.get('a/two.txt')).toString()).toBe('other');
	});

	test('what is not there is an error, not an empty file', async () => {
		await expect(driver().get('a/none.txt')).rejects.toThrow();
	});

	test.each(['../out', 'a/../../out', '/etc/passwd', 'a//b', 'A', 'a\0b', ''])(
		'%j is no key',
		async (key) => {
			await expect(driver().put(key, Buffer.from('x'), 'text/plain')).rejects.toThrow(
				'storage key'
			);
			await expect(driver().get(key)).rejects.toThrow('storage key');
		}
	);
});

test('the object lies there as sent, without an upload’s framing and with its type', async () => {
	const bytes = Buffer.from('%PDF-1.7 whole');
	await object().put('reports/plain.pdf', bytes, 'application/pdf');
	const files = readdirSync(join(place, 'objects'), { recursive: true }).map(String);
	const file = files.find((name) => name.includes('plain.pdf') && name.includes('object'));
	expect(readFileSync(join(place, 'objects', file as string)).equals(bytes)).toBe(true);
});

describe('a closed file', () => {
	test('is not to be read without its key, and an altered one is refused', () => {
		const bytes = randomBytes(100_000);
		const { key, sealed } = seal(bytes);
		expect(unseal(sealed, key).equals(bytes)).toBe(true);
		expect(sealed.includes(bytes.subarray(0, 32))).toBe(false);
		expect(() => unseal(sealed, randomBytes(32))).toThrow();
		const altered = Buffer.from(sealed);
		altered[altered.length - 1] = (altered.at(-1) ?? 0) ^ 1;
		expect(() => unseal(altered, key)).toThrow();
	});

	test('has the same size whatever of a few bytes more or less it holds', () => {
		expect(seal(randomBytes(60_000)).sealed.length).toBe(seal(randomBytes(10)).sealed.length);
	});
});

test('a folder whose writer is killed at any moment holds whole files only', async () => {
	// The driver by itself, as a program that writes one file over and over.
	const out = join(place, 'writer');
	const entry = join(place, 'writer.ts');
	writeFileSync(
		entry,
		`import { folderStorage } from '${join(root, 'src/lib/server/storage/folder.ts')}';
		const storage = folderStorage(process.argv[2]);
		process.stdout.write('ready\\n');
		for (let n = 0; ; n = (n + 1) % 26)
			await storage.put('reports/one.bin', Buffer.alloc(8_000_000, 97 + n), 'application/octet-stream');`
	);
	await bundle({
		configFile: false,
		logLevel: 'silent',
		resolve: { alias: { $lib: join(root, 'src/lib') } },
		ssr: { noExternal: true, external: ['@aws-sdk/client-s3'] },
		build: {
			ssr: entry,
			outDir: out,
			target: 'node20',
			emptyOutDir: true,
			rollupOptions: { output: { entryFileNames: 'writer.mjs' } }
		}
	});
	const folder = join(place, 'killed');
	let seen = 0;
	const left = new Set<string>();
	for (let kill = 0; kill < 25; kill++) {
		const writer = spawn(process.execPath, [join(out, 'writer.mjs'), folder], {
			cwd: root,
			stdio: ['ignore', 'pipe', 'inherit']
		});
		const ended = new Promise((resolve) => writer.once('exit', resolve));
		await new Promise((resolve) => writer.stdout.once('data', resolve));
		await new Promise((resolve) => setTimeout(resolve, 5 + ((kill * 37) % 120)));
		writer.kill('SIGKILL');
		await ended;
		// Killed before it had made a thing.
		if (!existsSync(join(folder, 'reports'))) continue;
		for (const name of readdirSync(join(folder, 'reports'))) {
			if (name !== 'one.bin') {
				left.add(name);
				continue;
			}
			const bytes = readFileSync(join(folder, 'reports', name));
			expect(bytes.length).toBe(8_000_000);
			expect(bytes.equals(Buffer.alloc(8_000_000, bytes[0]))).toBe(true);
			seen++;
		}
	}
	expect(seen).toBeGreaterThan(5);
	// The kills did fall into the writing: what they cut off lies beside, under a name that no key can have.
	expect(left.size).toBeGreaterThan(0);
	for (const name of left) {
		expect(name).toMatch(/^one\.bin\..+\.part$/);
		await expect(folderStorage(folder).get(`reports/${name}`)).rejects.toThrow('storage key');
	}
}, 120_000);

test('a backup takes every file of a bucket into a folder and puts them back into an empty one', async () => {
	const area = (name: string) =>
		bucketArea('files', {
			S3_ENDPOINT: endpoint,
			S3_BUCKET: name,
			S3_ACCESS_KEY: 'S3RVER',
			S3_SECRET_KEY: 'S3RVER'
		});
	const bytes = randomBytes(3_000_000);
	await object().put('imports/one/study.csv', bytes, 'text/csv');
	await object().put('reports/two.pdf', Buffer.from('%PDF'), 'application/pdf');
	const folder = join(place, 'copy');
	expect(await area(bucket).isEmpty()).toBe(false);
	await area(bucket).copyTo(folder);
	expect(readFileSync(join(folder, 'imports/one/study.csv')).equals(bytes)).toBe(true);

	expect(await area('heddle-second').isEmpty()).toBe(true);
	await area('heddle-second').fillFrom(folder);
	const second = s3Storage({
		endpoint,
		bucket: 'heddle-second',
		region: 'us-east-1',
		accessKey: 'S3RVER',
		secretKey: 'S3RVER'
	});
	expect((await second.get('imports/one/study.csv')).equals(bytes)).toBe(true);
	expect((await second.get('reports/two.pdf')).toString()).toBe('%PDF');
});
