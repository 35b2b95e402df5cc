import { StatsError } from '../errors.js';

/** A sequence of random numbers that depends on its seed and number alone. */
export interface RandomStream {
	/** Uniform on the open interval from 0 to 1, with 53 random bits. */
	uniform(): number;
	/** Standard normal. */
	normal(): number;
	/** Gamma with the given shape > 0 and scale 1. */
	gamma(shape: number): number;
	/** Chi-squared on `df` > 0 degrees of freedom. */
	chiSquare(df: number): number;
	/** A whole number from 0 to `count` − 1. */
	below(count: number): number;
}

const MULTIPLIER_0 = 0xd2511f53;
const MULTIPLIER_1 = 0xcd9e8d57;
const WEYL_0 = 0x9e3779b9;
const WEYL_1 = 0xbb67ae85;

/** The upper 32 bits of the product of two 32-bit numbers. */
function upperHalf(a: number, b: number): number {
	const [aHigh, aLow] = [a >>> 16, a & 0xffff];
	const [bHigh, bLow] = [b >>> 16, b & 0xffff];
	const low = aLow * bLow;
	const middle = aHigh * bLow + (low >>> 16);
	const other = aLow * bHigh + (middle & 0xffff);
	return (aHigh * bHigh + Math.floor(middle / 65536) + Math.floor(other / 65536)) >>> 0;
}

/**
 * The four random words of one counter (four 32-bit words) under one key (two), written into `into`.
 *
 * Philox4x32-10: a bijection of counters, so streams under different counters never overlap.
 * Source: Salmon, Moraes, Dror & Shaw (2011), Parallel random numbers: as easy as 1, 2, 3. SC '11.
 */
export function philox(
	counter: ArrayLike<number>,
	key: ArrayLike<number>,
	into: Uint32Array = new Uint32Array(4)
): Uint32Array {
	let c0 = counter[0]! >>> 0;
	let c1 = counter[1]! >>> 0;
	let c2 = counter[2]! >>> 0;
	let c3 = counter[3]! >>> 0;
	let k0 = key[0]! >>> 0;
	let k1 = key[1]! >>> 0;
	for (let round = 0; round < 10; round++) {
		const high0 = upperHalf(MULTIPLIER_0, c0);
		const low0 = Math.imul(MULTIPLIER_0, c0) >>> 0;
		const high1 = upperHalf(MULTIPLIER_1, c2);
		const low1 = Math.imul(MULTIPLIER_1, c2) >>> 0;
		c0 = (high1 ^ c1 ^ k0) >>> 0;
		c1 = low1;
		c2 = (high0 ^ c3 ^ k1) >>> 0;
		c3 = low0;
		k0 = (k0 + WEYL_0) >>> 0;
		k1 = (k1 + WEYL_1) >>> 0;
	}
	into[0] = c0;
	into[1] = c1;
	into[2] = c2;
	into[3] = c3;
	return into;
}

function wholeNumber(value: number, name: string): number {
	if (!Number.isSafeInteger(value) || value < 0)
		throw new StatsError(
			'bad-option',
			`The ${name} of the random numbers must be a whole number from 0 to 9007199254740991, not ${value}.`,
			{ [name]: value }
		);
	return value;
}

/**
 * The stream number `stream` of a seed, both whole numbers from 0 to 2⁵³ − 1.
 *
 * Streams of one seed are independent of each other and each is 2⁶⁴ blocks long; which worker asks for one, and
 * when, plays no part. Give each replicate the stream of its own number.
 */
export function randomStream(seed: number, stream = 0): RandomStream {
	wholeNumber(seed, 'seed');
	wholeNumber(stream, 'stream');
	const key = [seed % 2 ** 32, Math.floor(seed / 2 ** 32)];
	const counter = new Uint32Array([0, 0, stream % 2 ** 32, Math.floor(stream / 2 ** 32)]);
	const words = new Uint32Array(4);
	let next = 4;
	let spare = NaN;

	function word(): number {
		if (next === 4) {
			philox(counter, key, words);
			counter[0]!++;
			if (counter[0] === 0) counter[1]!++;
			next = 0;
		}
		return words[next++]!;
	}

	function uniform(): number {
		const high = word() >>> 5;
		const low = word() >>> 6;
		// Half a step up keeps 0 out; 1 − 2⁻⁵⁴ would round to 1, so it is kept out too.
		return Math.min((high * 67108864 + low + 0.5) / 9007199254740992, 1 - 2 ** -53);
	}

	/** Marsaglia & Bray (1964), SIAM Review 6:260-264: a pair by the polar method, one kept for the next call. */
	function normal(): number {
		if (spare === spare) {
			const kept = spare;
			spare = NaN;
			return kept;
		}
		for (;;) {
			const x = 2 * uniform() - 1;
			const y = 2 * uniform() - 1;
			const square = x * x + y * y;
			if (square >= 1 || square === 0) continue;
			const scale = Math.sqrt((-2 * Math.log(square)) / square);
			spare = y * scale;
			return x * scale;
		}
	}

	/** Marsaglia & Tsang (2000), ACM TOMS 26:363-372. */
	function gamma(shape: number): number {
		if (!(shape > 0) || !Number.isFinite(shape))
			throw new StatsError(
				'bad-option',
				`The shape of a gamma number must be positive and finite, not ${shape}.`,
				{ shape }
			);
		if (shape < 1) return gamma(shape + 1) * uniform() ** (1 / shape);
		const d = shape - 1 / 3;
		const c = 1 / Math.sqrt(9 * d);
		for (;;) {
			const z = normal();
			const v = (1 + c * z) ** 3;
			if (v <= 0) continue;
			if (Math.log(uniform()) < (z * z) / 2 + d - d * v + d * Math.log(v)) return d * v;
		}
	}

	return {
		uniform,
		normal,
		gamma,
		chiSquare: (df) => 2 * gamma(df / 2),
		below: (count) => Math.floor(uniform() * count)
	};
}
