import { mkdtempSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, it } from 'vitest';
import { Cancelled, type Supervision } from '../jobs/run';
import { fitInThread, type FitInput } from './fit';

const folder = mkdtempSync(join(tmpdir(), 'fit-'));
const program = (name: string, text: string) => {
	const file = join(folder, `${name}.mjs`);
	writeFileSync(file, text);
	return file;
};
const input: FitInput = { rows: [], spec: {}, options: {} };
const patient: Supervision = { cancelAsked: () => false, progress: async () => {} };

describe('a fit in a thread of its own', () => {
	it('is ended in the middle of its work when the job is told to stop', async () => {
		const beat = new SharedArrayBuffer(4);
		// Never yields and never answers: only ending the thread ends it.
		const spin = program(
			'spin',
			`import { workerData } from 'node:worker_threads';
			const beat = new Int32Array(workerData.rows[0]); for (;;) Atomics.add(beat, 0, 1);`
		);
		let asked = 0;
		const stopping: Supervision = {
			cancelAsked: () => true,
			progress: async () => {
				if (++asked === 2) throw new Cancelled();
			}
		};
		await expect(
			fitInThread({ ...input, rows: [beat] as never }, stopping, spin)
		).rejects.toBeInstanceOf(Cancelled);
		await new Promise((resolve) => setTimeout(resolve, 300));
		const after = Atomics.load(new Int32Array(beat), 0);
		expect(after).toBeGreaterThan(0);
		await new Promise((resolve) => setTimeout(resolve, 100));
		expect(Atomics.load(new Int32Array(beat), 0)).toBe(after);
	});

	it('gives what the statistics refuse as a sentence, and a crash as a fault', async () => {
		const refuse = program(
			'refuse',
			`import { parentPort } from 'node:worker_threads';
			parentPort.postMessage({ kind: 'refused', code: 'no-data', sentence: 'No row can be used.' });`
		);
		await expect(fitInThread(input, patient, refuse)).rejects.toMatchObject({
			code: 'NOT_ANALYSABLE',
			message: 'No row can be used.'
		});
		const crash = program('crash', `throw new Error('broken');`);
		await expect(fitInThread(input, patient, crash)).rejects.toThrow('broken');
		const silent = program('silent', `process.exit(3);`);
		await expect(fitInThread(input, patient, silent)).rejects.toThrow(/status 3/);
	});

	it('tells how far it is, and gives the result', async () => {
		const slow = program(
			'slow',
			`import { parentPort } from 'node:worker_threads';
			parentPort.postMessage({ kind: 'progress', fraction: 0.5 });
			setTimeout(() => parentPort.postMessage({ kind: 'result', result: { fine: true } }), 700);`
		);
		const told: number[] = [];
		const result = await fitInThread(
			input,
			{ cancelAsked: () => false, progress: async (fraction) => void told.push(fraction) },
			slow
		);
		expect(result).toEqual({ fine: true });
		expect(told).toContain(0.5);
	});
});
