import { existsSync } from 'node:fs';
import { availableParallelism } from 'node:os';
import { fileURLToPath } from 'node:url';
import { Worker } from 'node:worker_threads';
import {
	evidencePart,
	gatherEvidence,
	StatsError,
	type EvidencePart,
	type EvidencePlan,
	type EvidenceResult,
	type Supervision
} from '$lib/stats';

/** What a thread is given: the plan and its range of refits. */
export interface EvidenceShare {
	plan: EvidencePlan;
	range: [number, number];
}

export type EvidenceMessage =
	| { kind: 'progress'; fraction: number }
	| { kind: 'part'; part: EvidencePart }
	| { kind: 'refused'; code: StatsError['code']; sentence: string };

/** Fewer refits than this are not worth a thread. */
const LEAST = 25;
/** How often it is asked whether the work is to stop, in milliseconds. */
const EVERY_MS = 200;

export interface Threads extends Supervision {
	/** As many as the machine has processors unless said otherwise. */
	workers?: number;
	/** The built program of a share; where it is not there (in tests) the work is done here. */
	program?: string;
}

/**
 * The answer of a plan of the evidence, its refits split over threads by range; the same bits for any number.
 *
 * Told to stop, it ends every thread and throws the error `stopped`. The plan itself is made before, on one thread.
 */
export async function evidenceInThreads(
	plan: EvidencePlan,
	{
		workers = availableParallelism(),
		program = fileURLToPath(new URL('evidence-thread.js', import.meta.url)),
		onProgress,
		shouldStop
	}: Threads = {}
): Promise<EvidenceResult> {
	const supervision = { ...(onProgress && { onProgress }), ...(shouldStop && { shouldStop }) };
	const count = Math.max(1, Math.min(workers, Math.floor(plan.refits / LEAST)));
	if (count === 1 || !existsSync(program))
		return gatherEvidence(plan, [evidencePart(plan, 0, plan.refits, supervision)]);
	const border = (k: number) => Math.floor((k * plan.refits) / count);
	const fractions = new Array<number>(count).fill(0);
	const threads: Worker[] = [];
	let timer: NodeJS.Timeout | undefined;
	try {
		const stopped = new Promise<never>((_, reject) => {
			timer = setInterval(() => {
				onProgress?.(fractions.reduce((sum, f) => sum + f / count, 0));
				if (shouldStop?.()) reject(new StatsError('stopped', 'The refits were stopped.'));
			}, EVERY_MS);
		});
		const parts = Array.from({ length: count }, (_, k) => {
			const share: EvidenceShare = { plan, range: [border(k), border(k + 1)] };
			const thread = new Worker(program, { workerData: share });
			threads.push(thread);
			return partOf(thread, (fraction) => (fractions[k] = fraction));
		});
		const gathered = gatherEvidence(plan, await Promise.race([Promise.all(parts), stopped]));
		onProgress?.(1);
		return gathered;
	} finally {
		clearInterval(timer);
		await Promise.all(threads.map((thread) => thread.terminate()));
	}
}

function partOf(thread: Worker, tell: (fraction: number) => void): Promise<EvidencePart> {
	const part = new Promise<EvidencePart>((resolve, reject) => {
		thread.on('message', (message: EvidenceMessage) => {
			if (message.kind === 'progress') tell(message.fraction);
			else if (message.kind === 'part') resolve(message.part);
			else reject(new StatsError(message.code, message.sentence));
		});
		thread.once('error', reject);
		thread.once('exit', () => reject(new Error('A thread of the refits ended without an answer.')));
	});
	// When one thread fails all are ended, and the others' endings are no news.
	part.catch(() => undefined);
	return part;
}
