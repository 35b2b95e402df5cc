import { parentPort, workerData } from 'node:worker_threads';
import { analyseGrowth, StatsError } from '$lib/stats';
import type { FitInput, FitMessage } from '$lib/server/looks/fit';

/** A thread of its own for one fit: the worker beside it stays free to hear that the fit is to stop. */
const input = workerData as FitInput;
const say = (message: FitMessage) => parentPort?.postMessage(message);

try {
	const result = analyseGrowth(input.rows, input.spec, {
		...input.options,
		onProgress: (fraction) => say({ kind: 'progress', fraction })
	});
	say({ kind: 'result', result });
} catch (error) {
	if (!(error instanceof StatsError)) throw error;
	say({ kind: 'refused', code: error.code, sentence: error.message });
}
