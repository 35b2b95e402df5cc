import { dirname, join } from 'node:path';
import { Worker } from 'node:worker_threads';
import type { GrowthOptions, GrowthResult, GrowthRow, GrowthSpec } from '$lib/stats';
import { Refusal } from '$lib/refusal';
import type { Supervision } from '../jobs/run';

export interface FitInput {
	rows: GrowthRow[];
	spec: GrowthSpec;
	options: Pick<GrowthOptions, 'method' | 'randomIntercept' | 'degreesOfFreedom'>;
}

export type FitMessage =
	| { kind: 'progress'; fraction: number }
	| { kind: 'result'; result: GrowthResult }
	| { kind: 'refused'; code: string; sentence: string };

/** The thread's program lies beside the worker's own in the command-line build. */
const program = () =>
	join(process.env.CLI_DIR ?? dirname(process.argv[1] ?? 'build/cli/worker.js'), 'fit-thread.js');

/** How often the job is asked whether it is to stop, in milliseconds. */
const everyMs = 300;

/**
 * Fits in a thread of its own. Told to stop, it ends the thread and throws what `supervision.progress` threw; what the
 * statistics cannot do comes as a NOT_ANALYSABLE refusal with their sentence.
 */
export function fitInThread(
	input: FitInput,
	supervision: Supervision,
	file = program()
): Promise<GrowthResult> {
	return new Promise((resolve, reject) => {
		const thread = new Worker(file, {
			workerData: input,
			resourceLimits: { maxOldGenerationSizeMb: 2048 }
		});
		let fraction = 0;
		let asking = false;
		const finish = (end: () => void) => {
			clearInterval(timer);
			void thread.terminate();
			end();
		};
		const timer = setInterval(() => {
			if (asking) return;
			asking = true;
			// The fit is the middle of the job: reading comes before it, keeping the result after.
			supervision
				.progress(0.1 + 0.8 * fraction, 'Fitting the model.')
				.catch((thrown: unknown) => finish(() => reject(thrown)))
				.finally(() => (asking = false));
		}, everyMs);
		thread.on('message', (message: FitMessage) => {
			if (message.kind === 'progress') fraction = message.fraction;
			else if (message.kind === 'result') finish(() => resolve(message.result));
			else finish(() => reject(new Refusal('NOT_ANALYSABLE', { why: message.sentence })));
		});
		thread.on('error', (error) => finish(() => reject(error)));
		thread.on('exit', (code) =>
			finish(() => reject(new Error(`The fit's thread ended with status ${code}`)))
		);
	});
}
