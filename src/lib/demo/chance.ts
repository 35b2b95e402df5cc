/** A repeatable source of chance for the demo's story. Not for allocation, tokens or anything secret. */
export interface Chance {
	/** Uniform, from 0 up to and without 1. */
	next(): number;
	/** Whether something of this probability happens. */
	happens(probability: number): boolean;
	/** Normal with this mean and standard deviation. */
	normal(mean: number, sd: number): number;
	/** Uniform whole number, both ends included. */
	whole(from: number, to: number): number;
	pick<T>(from: readonly T[]): T;
}

/** Mulberry32: 32 bits of state, plenty for a story of some ten thousand draws. */
export function chance(seed: number): Chance {
	let state = seed >>> 0;
	const next = () => {
		state = (state + 0x6d2b79f5) >>> 0;
		let t = state;
		t = Math.imul(t ^ (t >>> 15), t | 1);
		t ^= t + Math.imul(t ^ (t >>> 7), t | 61);
		return ((t ^ (t >>> 14)) >>> 0) / 4294967296;
	};
	return {
		next,
		happens: (probability) => next() < probability,
		// Box and Muller; 1 − u keeps the logarithm finite.
		normal: (mean, sd) =>
			mean + sd * Math.sqrt(-2 * Math.log(1 - next())) * Math.cos(2 * Math.PI * next()),
		whole: (from, to) => from + Math.floor(next() * (to - from + 1)),
		pick: (from) => from[Math.floor(next() * from.length)] as (typeof from)[number]
	};
}
