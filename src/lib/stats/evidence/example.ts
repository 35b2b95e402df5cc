import type { ModelDesign } from '../design/model-design.js';
import { randomStream } from '../numeric/random.js';

/** How the outcomes of an invented study hang together; variances in units of the independent errors' own. */
export interface Truth {
	level?: number;
	slope?: number;
	/** Variance of the serial part, which keeps `rho` of itself from one visit to the next. */
	serial?: number;
	rho?: number;
	visit?: number;
	/** Variance of the independent errors; 1 unless said otherwise. */
	noise?: number;
}

/** Lag-1 correlation 0.5, once by a lasting offset and once by errors that fade. */
export const lasting: Truth = { level: 1, noise: 1 };
export const fading: Truth = { serial: 2, rho: 0.5, noise: 0 };

/**
 * An invented study for tests and benches: two arms in turn, every subject seen at visits 0, 1, 2 …; mean a straight line
 * in each arm (a single line for one subject). `missing`: the share of later rows that is not there.
 */
export function inventStudy(
	truth: Truth,
	subjects: number,
	visits: number,
	[seed, stream]: readonly [number, number],
	missing = 0
): ModelDesign {
	const random = randomStream(seed, stream);
	const { level = 0, slope = 0, serial = 0, rho = 0, visit = 0, noise = 1 } = truth;
	const shared = Array.from({ length: visits }, () => Math.sqrt(visit) * random.normal());
	const time: number[] = [];
	const y: number[] = [];
	const start = [0];
	const arm: number[] = [];
	for (let s = 0; s < subjects; s++) {
		const own = Math.sqrt(level) * random.normal();
		const rate = Math.sqrt(slope) * random.normal();
		let carried = random.normal();
		for (let v = 0; v < visits; v++) {
			if (v > 0) carried = rho * carried + Math.sqrt(1 - rho * rho) * random.normal();
			const error = Math.sqrt(noise) * random.normal();
			if (random.uniform() < missing && v > 0) continue;
			time.push(v);
			y.push(10 + 0.2 * v + own + rate * v + Math.sqrt(serial) * carried + shared[v]! + error);
			arm.push(s % 2);
		}
		start.push(time.length);
	}
	const n = y.length;
	const columns: [string, (i: number) => number][] = [
		['intercept', () => 1],
		['time', (i) => time[i]!]
	];
	if (subjects > 1)
		columns.push(['group b', (i) => arm[i]!], ['time × group b', (i) => time[i]! * arm[i]!]);
	const x = new Float64Array(n * columns.length);
	columns.forEach(([, value], j) => {
		for (let i = 0; i < n; i++) x[j * n + i] = value(i);
	});
	return {
		n,
		p: columns.length,
		x,
		y: Float64Array.from(y),
		names: columns.map(([name]) => name),
		time: Float64Array.from(time),
		visit: Int32Array.from(time),
		visits: Array.from({ length: visits }, (_, v) => String(v)),
		subjectStart: Int32Array.from(start),
		subjects: Array.from({ length: subjects }, (_, s) => `subject ${s + 1}`),
		subjectGroup: Int32Array.from({ length: subjects }, (_, s) => s % 2),
		groups: subjects > 1 ? ['a', 'b'] : [],
		rowOf: Int32Array.from({ length: n }, (_, i) => i),
		timeInMean: 'linear',
		aliased: []
	};
}
