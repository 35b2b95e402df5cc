import { parentPort, workerData } from 'node:worker_threads';
import { evidencePart, StatsError } from '$lib/stats';
import type { EvidenceMessage, EvidenceShare } from '$lib/command-line/evidence-in-threads';

/** A thread's share of the refits: its range of replicates, drawn from their own streams. */
const { plan, range } = workerData as EvidenceShare;
const say = (message: EvidenceMessage) => parentPort?.postMessage(message);

try {
	let told = 0;
	const part = evidencePart(plan, ...range, {
		onProgress(fraction) {
			if (fraction - told < 0.01) return;
			told = fraction;
			say({ kind: 'progress', fraction });
		}
	});
	say({ kind: 'part', part });
} catch (error) {
	if (!(error instanceof StatsError)) throw error;
	say({ kind: 'refused', code: error.code, sentence: error.message });
}
