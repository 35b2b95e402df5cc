// A random-intercept growth model of 1,000 subjects with 9 visits each, in a thread of its own, as the worker does it.
import { Worker } from 'node:worker_threads';
import { program } from '../../scripts/lib/build.mjs';
import { measure } from './support/measure.mjs';

const subjects = 1000;
const visits = [0, 0.04, 0.08, 0.25, 0.5, 0.75, 1, 1.5, 2];

/** Numbers that look like chance and are the same each time. */
let state = 20260609;
function unit() {
	state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
	return (state + 0.5) / 2 ** 32;
}
const normal = () => Math.sqrt(-2 * Math.log(unit())) * Math.cos(2 * Math.PI * unit());

const rows = Array.from({ length: subjects }, (_, subject) => {
	const own = 8 * normal();
	return visits.map((time) => ({
		subject: `S${subject}`,
		group: subject % 2 ? 'A' : 'B',
		time,
		outcome: 52 + own - (3 + (subject % 2) * 0.6) * time + 4 * normal(),
		covariates: {}
	}));
}).flat();

/** @param {'kenward-roger' | 'satterthwaite'} degreesOfFreedom */
const fit = (degreesOfFreedom) =>
	new Promise((resolve, reject) => {
		const thread = new Worker(program(process.env.HEDDLE_BUILD_DIR ?? 'build-test', 'fit-thread'), {
			workerData: {
				rows,
				spec: { group: { levels: ['A', 'B'] }, covariates: [] },
				options: { method: 'REML', randomIntercept: true, degreesOfFreedom }
			}
		});
		thread.on('message', (message) => {
			if (message.kind === 'result') resolve(message.result);
			if (message.kind === 'refused') reject(new Error(message.sentence));
		});
		thread.on('error', reject);
	});

await measure('fit of 1,000 × 9, Kenward–Roger', 10, () => fit('kenward-roger'), { first: 1 });
await measure('fit of 1,000 × 9, Satterthwaite', 10, () => fit('satterthwaite'), { first: 1 });
process.exit(0);
