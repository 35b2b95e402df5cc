import { createHash } from 'node:crypto';
import { describe, expect, it } from 'vitest';
import { randomStream } from './generator.server';
import { makeList, type ListEntry } from './list.server';

const seedOf = (text: string) => createHash('sha256').update(text).digest('hex');
const armsOf = (ratios: number[]) => ratios.map((ratio, at) => ({ key: `arm-${at}`, ratio }));
const sumOf = (numbers: number[]) => numbers.reduce((total, each) => total + each, 0);

const ratios: number[][] = [
	[1, 1],
	[2, 1],
	[1, 1, 1],
	[3, 2, 1],
	[2, 2, 1],
	[1, 1, 1, 1]
];
const places: [string, string[]][] = [
	['across sites', ['kidney-function=below-45', 'kidney-function=from-45']],
	[
		'per site',
		['01', '02', '03', '04'].flatMap((site) => [
			`kidney-function=below-45|site=${site}`,
			`kidney-function=from-45|site=${site}`
		])
	]
];

describe('balance, looked at in every block of 10,000 allocations', () => {
	it.each(ratios.flatMap((ratio) => places.map(([where, strata]) => ({ ratio, where, strata }))))(
		'in ratio $ratio, $where',
		({ ratio, strata }) => {
			const arms = armsOf(ratio);
			const sum = sumOf(ratio);
			const { entries } = makeList({
				arms,
				strata,
				blockSizes: [sum, 2 * sum, 3 * sum],
				perStratum: Math.ceil(10_000 / strata.length),
				seed: seedOf(`balance ${ratio} ${strata.length}`)
			});
			expect(entries.length).toBeGreaterThanOrEqual(10_000);
			const blocks = new Map<string, ListEntry[]>();
			for (const entry of entries) {
				const name = `${entry.stratum} ${entry.block}`;
				blocks.set(name, [...(blocks.get(name) ?? []), entry]);
			}
			const held = new Map<string, number>();
			let checked = 0;
			for (const block of blocks.values()) {
				const [first] = block;
				expect(block).toHaveLength(first!.blockSize);
				for (const arm of arms) {
					const here = block.filter((entry) => entry.arm === arm.key).length;
					expect(here).toBe((block.length / sum) * arm.ratio);
					// So the stratum as a whole holds the exact ratio at each block's end.
					const name = `${first!.stratum} ${arm.key}`;
					held.set(name, (held.get(name) ?? 0) + here);
				}
				const [inAll] = [sumOf(arms.map((arm) => held.get(`${first!.stratum} ${arm.key}`) ?? 0))];
				for (const arm of arms)
					expect(held.get(`${first!.stratum} ${arm.key}`)! * sum).toBe(inAll * arm.ratio);
				checked += block.length;
			}
			expect(checked).toBe(entries.length);
		}
	);
});

/**
 * The most that anybody can expect to guess right in one block, even knowing its size and where it begins: at each place the
 * arm of which most are left. By going through all that may be left (dynamic programming over the counts).
 */
function mostGuessed(counts: number[]): number {
	const known = new Map<string, number>();
	const expected = (left: number[]): number => {
		const total = sumOf(left);
		if (total === 0) return 0;
		const name = left.join();
		const found = known.get(name);
		if (found !== undefined) return found;
		let value = Math.max(...left) / total;
		left.forEach((count, at) => {
			if (count > 0)
				value +=
					(count / total) * expected(left.map((each, other) => each - (other === at ? 1 : 0)));
		});
		known.set(name, value);
		return value;
	};
	return expected(counts);
}

const binomial = (n: number, k: number): number =>
	Array.from({ length: k }, (_, at) => (n - at) / (k - at)).reduce((a, b) => a * b, 1);

/** Share right when block sizes are drawn evenly from these: of all guesses, not of all blocks. */
const bound = (ratio: number[], sizes: number[]): number =>
	sumOf(sizes.map((size) => mostGuessed(ratio.map((part) => (size / sumOf(ratio)) * part)))) /
	sumOf(sizes);

/**
 * Guesses the arm that lags most behind the ratio, ties by chance: the convergence strategy of Blackwell and Hodges (Ann Math
 * Stat 1957;28:449–460). It knows the ratio and what was given so far in the stratum, not the sizes of blocks.
 */
function guessedRight(entries: readonly ListEntry[], ratio: number[], seed: string): number {
	const stream = randomStream(seed, 'guesses');
	const sum = sumOf(ratio);
	const given = ratio.map(() => 0);
	let right = 0;
	for (const [at, entry] of entries.entries()) {
		const lags = ratio.map((part, arm) => (at * part) / sum - given[arm]!);
		const most = Math.max(...lags);
		const best = lags.flatMap((lag, arm) => (lag > most - 1e-9 ? [arm] : []));
		// Where nothing lags, the arm that is given most often.
		const top = Math.max(...best.map((arm) => ratio[arm]!));
		const pool = best.filter((arm) => ratio[arm] === top);
		const guess = pool[stream.below(pool.length)]!;
		const arm = Number(entry.arm.slice(4));
		if (guess === arm) right += 1;
		given[arm]! += 1;
	}
	return right;
}

describe('guessing the next arm', () => {
	it('the bound by enumeration is the published one for two equal arms', () => {
		// Blackwell & Hodges 1957: in a block of 2b, b + 2^(2b−1)/C(2b, b) − 1/2 right on average.
		for (const b of [1, 2, 3, 4, 5, 10])
			expect(mostGuessed([b, b])).toBeCloseTo(b + 2 ** (2 * b - 1) / binomial(2 * b, b) - 0.5, 10);
		// Zhao, Weng, Wu and Palesch, Pharm Stat 2012;11:39–48, table III: blocks of 20, 0.616 to 0.617 by simulation.
		expect(mostGuessed([10, 10]) / 20).toBeCloseTo(0.617, 3);
		// By hand, block of 2: the first by chance, the second for sure.
		expect(mostGuessed([1, 1])).toBe(1.5);
	});

	it.each([
		{ ratio: [1, 1], multiples: [2, 3, 4] },
		{ ratio: [1, 1], multiples: [3, 4, 5] },
		{ ratio: [2, 1], multiples: [2, 3, 4] },
		{ ratio: [1, 1, 1], multiples: [2, 3, 5] },
		{ ratio: [3, 2, 1], multiples: [1, 2, 3] }
	])('in ratio $ratio gains nothing beyond the bound', ({ ratio, multiples }) => {
		const sizes = multiples.map((multiple) => multiple * sumOf(ratio));
		const { entries } = makeList({
			arms: armsOf(ratio),
			strata: ['all'],
			blockSizes: sizes,
			perStratum: 60_000,
			seed: seedOf(`guess ${ratio} ${multiples}`)
		});
		const share = guessedRight(entries, ratio, seedOf('guesser')) / entries.length;
		const limit = bound(ratio, sizes);
		// Four standard errors of a share of 60,000; guesses within a block hang together only in sum, which narrows it.
		const slack = 4 * Math.sqrt((limit * (1 - limit)) / entries.length);
		expect(share).toBeLessThan(limit + slack);
		// And the guesser is no straw man: he does better than always naming the largest arm.
		expect(share).toBeGreaterThan(Math.max(...ratio) / sumOf(ratio) + slack);
		// Two equal arms: the strategy is the best there is without the sizes and with them, so it meets the bound.
		if (ratio.length === 2 && ratio[0] === ratio[1])
			expect(Math.abs(share - limit)).toBeLessThan(slack);
	});
});
