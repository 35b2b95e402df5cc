import { mkdtempSync, rmSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { build } from 'vite';
import { fileURLToPath } from 'node:url';
import { evidence, planEvidence } from '$lib/stats';
import { inventStudy, lasting } from '../stats/evidence/example';
import { evidenceInThreads } from './evidence-in-threads';

const design = inventStudy(lasting, 12, 4, [20261201, 2000]);
const options = { refits: 100, seed: 3 };
const at = (path: string) => fileURLToPath(new URL(path, import.meta.url));
let folder: string;
let program: string;

/** The thread's program as the command-line build makes it, by itself. */
beforeAll(async () => {
	folder = mkdtempSync(join(tmpdir(), 'heddle-evidence-'));
	await build({
		configFile: false,
		logLevel: 'error',
		resolve: { alias: { $lib: at('..') } },
		ssr: { noExternal: true },
		build: {
			ssr: true,
			target: 'node20',
			outDir: folder,
			rollupOptions: {
				input: at('../../cli/evidence-thread.ts'),
				output: { entryFileNames: 'thread.mjs' }
			}
		}
	});
	program = join(folder, 'thread.mjs');
}, 120_000);
afterAll(() => rmSync(folder, { recursive: true, force: true }));

test('any number of threads gives the bits of one', async () => {
	const plan = planEvidence(design, options);
	const told: number[] = [];
	const alone = JSON.stringify(evidence(design, options));
	for (const workers of [1, 2, 3]) {
		const result = await evidenceInThreads(plan, {
			workers,
			program,
			onProgress: (fraction) => told.push(fraction)
		});
		expect(JSON.stringify(result)).toBe(alone);
	}
	expect(told.at(-1)).toBe(1);
});

test('told to stop, it ends its threads and says so', async () => {
	const plan = planEvidence(design, { ...options, refits: 20_000 });
	await expect(
		evidenceInThreads(plan, { workers: 2, program, shouldStop: () => true })
	).rejects.toMatchObject({ code: 'stopped' });
});

test('a thread that ends without an answer is an error, not a wait without end', async () => {
	const broken = join(folder, 'broken.mjs');
	writeFileSync(broken, 'process.exit(0);');
	const plan = planEvidence(design, options);
	await expect(evidenceInThreads(plan, { workers: 2, program: broken })).rejects.toThrow(
		/ended without an answer/
	);
});
