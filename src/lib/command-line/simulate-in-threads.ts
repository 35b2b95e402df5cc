import { existsSync } from 'node:fs';
import { availableParallelism } from 'node:os';
import { fileURLToPath } from 'node:url';
import { Worker } from 'node:worker_threads';
import {
	joinReplicates,
	simulateReplicates,
	type Replicates,
	type SimulatedStudy,
	type SimulationPlan
} from '$lib/stats';
import { analysisOf } from './analyses';

export interface SimulationShare {
	study: SimulatedStudy;
	truth: number;
	analysis: SimulationPlan['analysis'];
	range: [number, number];
}

/** Fewer replicates than this are not worth a thread. */
const LEAST = 50;

/**
 * All replicates of a simulation under one truth, split over threads by range; the same bits for any number.
 *
 * `thread` is the built program of a share; where it is not there (in tests) the work is done here.
 */
export async function simulateInThreads(
	study: SimulatedStudy,
	truth: number,
	{ replicates, analysis, workers }: SimulationPlan,
	thread = fileURLToPath(new URL('simulation-thread.js', import.meta.url))
): Promise<Replicates> {
	const count = Math.max(
		1,
		Math.min(workers ?? availableParallelism(), Math.floor(replicates / LEAST))
	);
	if (count === 1 || !existsSync(thread))
		return simulateReplicates(study, truth, analysisOf(analysis, study.question), [0, replicates]);
	const border = (k: number) => Math.floor((k * replicates) / count);
	const shares = Array.from({ length: count }, (_, k): SimulationShare => {
		return { study, truth, analysis, range: [border(k), border(k + 1)] };
	});
	return joinReplicates(await Promise.all(shares.map((share) => inThread(thread, share))));
}

function inThread(thread: string, share: SimulationShare): Promise<Replicates> {
	return new Promise((resolve, reject) => {
		const worker = new Worker(thread, { workerData: share });
		worker.once('message', resolve);
		worker.once('error', reject);
		worker.once('exit', () =>
			reject(new Error('A thread of the simulation ended without an answer.'))
		);
	});
}
