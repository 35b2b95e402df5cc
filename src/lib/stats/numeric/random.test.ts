import { describe, expect, test } from 'vitest';
import { expectWithin } from '../reference/close.js';
import { chiSquareAbove, normalBelow } from './distribution.js';
import { covarianceFactor, multivariateNormal } from './multivariate-normal.js';
import { philox, randomStream } from './random.js';

describe('Philox4x32-10 against the vectors published with it (from memory)', () => {
	test.each([
		[[0, 0, 0, 0], [0, 0], '6627e8d5 e169c58d bc57ac4c 9b00dbd8'],
		[
			[0xffffffff, 0xffffffff, 0xffffffff, 0xffffffff],
			[0xffffffff, 0xffffffff],
			'408f276d 41c83b0e a20bc7c6 6d5451fd'
		],
		[
			[0x243f6a88, 0x85a308d3, 0x13198a2e, 0x03707344],
			[0xa4093822, 0x299f31d0],
			'd16cfe09 94fdcceb 5001e420 24126ea1'
		]
	])('counter %j, key %j', (counter, key, words) => {
		const found = [...philox(counter, key)].map((w) => w.toString(16).padStart(8, '0')).join(' ');
		expect(found).toBe(words);
	});
});

test('a stream is the same whenever it is asked for, and another number or seed is another stream', () => {
	const first = (seed: number, stream: number) => {
		const random = randomStream(seed, stream);
		return [random.uniform(), random.normal(), random.normal(), random.chiSquare(3)];
	};
	const again = first(7, 12);
	expect(first(7, 13)).not.toEqual(again);
	expect(first(8, 12)).not.toEqual(again);
	expect(first(7, 12)).toEqual(again);
	expect(first(7, 2 ** 40)).not.toEqual(first(7, 0));
	expect(first(2 ** 40, 5)).not.toEqual(first(0, 5));
});

/** The largest distance between the empirical and a given distribution function, times √n. */
function kolmogorov(values: number[], below: (x: number) => number): number {
	const sorted = values.toSorted((a, b) => a - b);
	const n = sorted.length;
	let largest = 0;
	sorted.forEach((x, i) => {
		const f = below(x);
		largest = Math.max(largest, f - i / n, (i + 1) / n - f);
	});
	return largest * Math.sqrt(n);
}

/** Kolmogorov's limit at 1 in 10,000 is 2.225 (Smirnov 1948, from memory: 2 Σ(−1)^(k−1) exp(−2k²x²) = 1e-4). */
const FAR = 2.225;

test.each([
	['uniform', (r: ReturnType<typeof randomStream>) => r.uniform(), (x: number) => x],
	['normal', (r: ReturnType<typeof randomStream>) => r.normal(), normalBelow],
	[
		'chi-squared on 5 df',
		(r: ReturnType<typeof randomStream>) => r.chiSquare(5),
		(x: number) => 1 - chiSquareAbove(x, 5)
	],
	[
		'chi-squared on 0.7 df',
		(r: ReturnType<typeof randomStream>) => r.chiSquare(0.7),
		(x: number) => 1 - chiSquareAbove(x, 0.7)
	]
])(
	'%s numbers follow their distribution, within one stream and across streams',
	(_, draw, below) => {
		const one = randomStream(20261201, 3);
		const within = Array.from({ length: 40_000 }, () => draw(one));
		const across = Array.from({ length: 20_000 }, (_, k) => draw(randomStream(20261201, k)));
		expect(kolmogorov(within, below)).toBeLessThan(FAR);
		expect(kolmogorov(across, below)).toBeLessThan(FAR);
	}
);

test('neighbours, within a stream and between streams, are uncorrelated', () => {
	const n = 40_000;
	const one = randomStream(5, 0);
	const values = Array.from({ length: n + 1 }, () => one.normal());
	const firsts = Array.from({ length: n + 1 }, (_, k) => randomStream(5, k).normal());
	for (const series of [values, firsts]) {
		let sum = 0;
		for (let i = 0; i < n; i++) sum += series[i]! * series[i + 1]!;
		expect(Math.abs(sum) / Math.sqrt(n)).toBeLessThan(4);
	}
});

test('whole numbers below a count are all reached equally often', () => {
	const random = randomStream(99, 1);
	const counts = new Array<number>(6).fill(0);
	for (let i = 0; i < 60_000; i++) counts[random.below(6)]!++;
	const square = counts.reduce((sum, c) => sum + (c - 10_000) ** 2 / 10_000, 0);
	expect(chiSquareAbove(square, 5)).toBeGreaterThan(1e-4);
});

test('multivariate normal numbers have the covariance asked for, singular ones too', () => {
	const covariance = [
		[4, 2, 0],
		[2, 1, 0],
		[0, 0, 9]
	];
	const factor = covarianceFactor(covariance);
	const random = randomStream(31, 0);
	const n = 40_000;
	const sums = covariance.map((row) => row.map(() => 0));
	for (let k = 0; k < n; k++) {
		const draw = multivariateNormal(random, [10, -3, 0], factor);
		expectWithin(draw[0]! - 10, 2 * (draw[1]! + 3), 1e-12);
		const apart = [draw[0]! - 10, draw[1]! + 3, draw[2]!];
		apart.forEach((a, i) => apart.forEach((b, j) => (sums[i]![j]! += a * b)));
	}
	covariance.forEach((row, i) =>
		row.forEach((v, j) => {
			const error = Math.sqrt((covariance[i]![i]! * covariance[j]![j]! + v * v) / n);
			expectWithin(sums[i]![j]! / n, v, 4 * error, `${i},${j}`);
		})
	);
});

test('what is no covariance, seed, stream or shape is refused', () => {
	expect(() =>
		covarianceFactor([
			[1, 2],
			[2, 1]
		])
	).toThrow(/negative variance/);
	expect(() =>
		covarianceFactor([
			[1, 0.5],
			[0.2, 1]
		])
	).toThrow(/symmetric/);
	expect(() => covarianceFactor([[1, 0.5]])).toThrow(/columns/);
	expect(() => randomStream(-1)).toThrow(/seed/);
	expect(() => randomStream(1, 0.5)).toThrow(/stream/);
	expect(() => randomStream(1).chiSquare(0)).toThrow(/positive/);
});
