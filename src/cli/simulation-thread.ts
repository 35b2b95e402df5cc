import { parentPort, workerData } from 'node:worker_threads';
import { simulateReplicates } from '$lib/stats';
import { analysisOf } from '$lib/command-line/analyses';
import type { SimulationShare } from '$lib/command-line/simulate-in-threads';

/** A thread's share of a simulation: its range of replicates, drawn from their own streams. */
const { study, truth, analysis, range } = workerData as SimulationShare;
parentPort?.postMessage(
	simulateReplicates(study, truth, analysisOf(analysis, study.question), range)
);
