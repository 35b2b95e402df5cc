import { createHash } from 'node:crypto';
import { describe, expect, it } from 'vitest';
import fc from 'fast-check';
import { isSeed, newSeed, randomStream } from './generator.server';
import { readKitNumber } from './kit';
import { canonicalList, hashOfList, makeList, type ListEntry, type ListPlan } from './list.server';
import { stratumKey, stratumKeys } from './strata';

const seedOf = (n: number) => createHash('sha256').update(`test ${n}`).digest('hex');

const plan = (change: Partial<ListPlan> = {}): ListPlan => ({
	arms: [
		{ key: 'a', ratio: 1 },
		{ key: 'b', ratio: 1 }
	],
	strata: ['site=01', 'site=02', 'site=03'],
	blockSizes: [4, 6, 8],
	perStratum: 60,
	seed: seedOf(1),
	...change
});

const byStratum = (entries: readonly ListEntry[]) => {
	const groups = new Map<string, ListEntry[]>();
	for (const entry of entries)
		groups.set(entry.stratum, [...(groups.get(entry.stratum) ?? []), entry]);
	return [...groups.values()];
};

describe('random numbers from a seed', () => {
	it('are HMAC-SHA-256 over the stream name and a counter', () => {
		// Computed with Python 3.11: hmac.new(key, name + b'\0' + i.to_bytes(8, 'big'), hashlib.sha256).
		const seed = `${'00'.repeat(31)}01`;
		const a = randomStream(seed, 'a');
		expect(a.block().toString('hex')).toBe(
			'71ff6fbdbebc764a36281d8e035653295a3c3051670b81031536825a004dd9d6'
		);
		expect(a.block().toString('hex')).toBe(
			'fbb40e281819a397fe75e4c807f0a2b8d728a1f6ed106ca3df81a5e39e79134e'
		);
		expect(randomStream(seed, 'block orders: all').block().toString('hex')).toBe(
			'd3ca42b79a81a1c753a19964dbed809622d8576c17c18bd921b4531888e065b4'
		);
		// 0x71ff6fbd modulo 1000, by hand: 1912565693.
		expect(randomStream(seed, 'a').below(1000)).toBe(1912565693 % 1000);
	});

	it('skip what would make some outcomes likelier', () => {
		const n = 2 ** 31 + 1;
		const raw = randomStream(seedOf(3), 'x');
		const words = Array.from({ length: 8 }, () => raw.block()).flatMap((block) =>
			Array.from({ length: 8 }, (_, at) => block.readUInt32BE(at * 4))
		);
		// n goes into 2³² once, so that words from n upwards are skipped and the others stand as they are.
		const kept = words.filter((word) => word < n).slice(0, 10);
		const stream = randomStream(seedOf(3), 'x');
		expect(kept.map(() => stream.below(n))).toEqual(kept);
		expect(words.slice(0, 10)).not.toEqual(kept);
	});

	it('are even: each of six outcomes comes about as often', () => {
		const stream = randomStream(seedOf(2), 'dice');
		const counts = Array(6).fill(0);
		for (let throws = 0; throws < 60_000; throws++) counts[stream.below(6)] += 1;
		const chiSquare = counts.reduce((total, seen) => total + (seen - 10_000) ** 2 / 10_000, 0);
		// 99.99 % point of chi-square on 5 degrees of freedom: 25.74 (tables). The seed is fixed, so the result is too.
		expect(chiSquare).toBeLessThan(25.74);
	});

	it('seeds come from the platform and are 32 bytes', () => {
		expect(isSeed(newSeed())).toBe(true);
		expect(newSeed()).not.toBe(newSeed());
		for (const text of ['', 'a'.repeat(63), 'A'.repeat(64), 'g'.repeat(64)])
			expect(isSeed(text)).toBe(false);
		expect(() => randomStream('1', 'a')).toThrow(RangeError);
	});
});

describe('the list', () => {
	it('holds the exact ratio in every block and starts afresh at each block’s end', () => {
		fc.assert(
			fc.property(
				fc.integer(),
				fc.array(fc.integer({ min: 1, max: 3 }), { minLength: 2, maxLength: 4 }),
				fc.array(fc.integer({ min: 1, max: 4 }), { minLength: 1, maxLength: 3 }),
				fc.integer({ min: 1, max: 40 }),
				(seed, ratios, multiples, perStratum) => {
					const sum = ratios.reduce((total, ratio) => total + ratio, 0);
					const arms = ratios.map((ratio, at) => ({ key: `arm-${at}`, ratio }));
					const list = makeList(
						plan({
							arms,
							blockSizes: multiples.map((each) => each * sum),
							perStratum,
							seed: seedOf(seed)
						})
					);
					for (const entries of byStratum(list.entries)) {
						expect(entries.length).toBeGreaterThanOrEqual(perStratum);
						expect(entries.map((entry) => entry.position)).toEqual(entries.map((_, at) => at + 1));
						const blocks = new Map<number, ListEntry[]>();
						for (const entry of entries)
							blocks.set(entry.block, [...(blocks.get(entry.block) ?? []), entry]);
						for (const block of blocks.values()) {
							expect(block).toHaveLength(block[0]!.blockSize);
							for (const arm of arms)
								expect(block.filter((entry) => entry.arm === arm.key)).toHaveLength(
									(block.length / sum) * arm.ratio
								);
						}
					}
				}
			),
			{ numRuns: 60 }
		);
	});

	// 1:1 permuted blocks: the difference never exceeds half the current block, and is 0 at each block's end;
	// over s strata with blocks of b the total is at most s·b/2 (counting argument).
	it('is never further out of balance than half a block', () => {
		fc.assert(
			fc.property(fc.integer(), (seed) => {
				const list = makeList(plan({ seed: seedOf(seed) }));
				const groups = byStratum(list.entries);
				let worst = 0;
				for (const entries of groups) {
					let difference = 0;
					let here = 0;
					for (const [at, entry] of entries.entries()) {
						difference += entry.arm === 'a' ? 1 : -1;
						expect(Math.abs(difference)).toBeLessThanOrEqual(entry.blockSize / 2);
						here = Math.max(here, Math.abs(difference));
						if (entries[at + 1]?.block !== entry.block) expect(difference).toBe(0);
					}
					worst += here;
				}
				expect(worst).toBeLessThanOrEqual((groups.length * 8) / 2);
			}),
			{ numRuns: 40 }
		);
	});

	// Blocks of 4, 6 and 8 in ratio 1:1 have 6, 20 and 70 orders (binomial coefficients).
	it.each([
		[4, 6, 25.74],
		[6, 20, 50.79],
		[8, 70, 121.44]
	])('of blocks of %i reaches each of the %i orders about as often', (size, orders, limit) => {
		const list = makeList(
			plan({
				strata: ['all'],
				blockSizes: [size],
				perStratum: size * orders * 60,
				seed: seedOf(size)
			})
		);
		const seen = new Map<string, number>();
		for (let at = 0; at < list.count; at += size) {
			const order = list.entries
				.slice(at, at + size)
				.map((entry) => entry.arm)
				.join('');
			seen.set(order, (seen.get(order) ?? 0) + 1);
		}
		expect(seen.size).toBe(orders);
		const chiSquare = [...seen.values()].reduce(
			(total, count) => total + (count - 60) ** 2 / 60,
			0
		);
		// 99.99 % points of chi-square on 5, 19 and 69 degrees of freedom (scipy 1 chi2.ppf); the seed is fixed.
		expect(chiSquare).toBeLessThan(limit);
	});

	it('varies its block sizes', () => {
		const sizes = new Set(makeList(plan()).entries.map((entry) => entry.blockSize));
		expect([...sizes].sort()).toEqual([4, 6, 8]);
	});

	it('follows from its seed, and from its seed alone', () => {
		const list = makeList(plan());
		expect(makeList(plan())).toEqual(list);
		expect(makeList(plan({ seed: seedOf(2) })).hash).not.toBe(list.hash);
		// Neither the order in which strata are named nor other strata change a stratum's entries.
		const arms = (of: Partial<ListPlan>, stratum: string) =>
			makeList(plan(of))
				.entries.filter((entry) => entry.stratum === stratum)
				.map((entry) => entry.arm);
		expect(arms({ strata: ['site=03', 'site=01'] }, 'site=01')).toEqual(arms({}, 'site=01'));
	});

	it('has a hash over its entries and their number', () => {
		const list = makeList(plan());
		expect(list.count).toBe(list.entries.length);
		expect(list.hash).toBe(hashOfList(list.entries));
		expect(createHash('sha256').update(canonicalList(list.entries)).digest('hex')).toBe(list.hash);
		const [first, ...rest] = list.entries;
		const other = { ...first!, arm: first!.arm === 'a' ? 'b' : 'a' };
		expect(hashOfList([other, ...rest])).not.toBe(list.hash);
		expect(canonicalList(list.entries)).not.toContain(plan().seed);
	});

	it('is refused for a plan that makes no sense', () => {
		const wrong: Partial<ListPlan>[] = [
			{ arms: [{ key: 'a', ratio: 1 }] },
			{
				arms: [
					{ key: 'a', ratio: 1 },
					{ key: 'a', ratio: 1 }
				]
			},
			{
				arms: [
					{ key: 'a', ratio: 0 },
					{ key: 'b', ratio: 1 }
				]
			},
			{ blockSizes: [] },
			{ blockSizes: [5] },
			{ blockSizes: [0] },
			{ perStratum: 0 },
			{ perStratum: 1e9 },
			{ strata: [] },
			{ strata: ['x', 'x'] },
			{ seed: 'secret' }
		];
		for (const change of wrong)
			expect(() => makeList(plan(change)), JSON.stringify(change)).toThrow(RangeError);
	});
});

describe('kit numbers', () => {
	it('are the same, in the same places, when the arms are swapped', () => {
		const list = makeList(plan());
		const swapped = makeList(
			plan({
				arms: [
					{ key: 'b', ratio: 1 },
					{ key: 'a', ratio: 1 }
				]
			})
		);
		const bare = (entries: ListEntry[]) => entries.map(({ arm: _, ...rest }) => rest);
		expect(bare(swapped.entries)).toEqual(bare(list.entries));
		expect(swapped.entries.map((entry) => entry.arm)).toEqual(
			list.entries.map((entry) => (entry.arm === 'a' ? 'b' : 'a'))
		);
	});

	it('differ, carry a check digit, and are in no order', () => {
		const kits = makeList(plan({ perStratum: 400 })).entries.map((entry) => entry.kit);
		expect(new Set(kits).size).toBe(kits.length);
		for (const kit of kits) expect(readKitNumber(kit)).toEqual({ ok: true, value: kit });
		const rises = kits.filter((kit, at) => at > 0 && kit > kits[at - 1]!).length;
		expect(rises / kits.length).toBeGreaterThan(0.4);
		expect(rises / kits.length).toBeLessThan(0.6);
	});

	it('tell nothing of the arm: each digit stands as often in either', () => {
		const entries = makeList(plan({ strata: ['all'], perStratum: 4000 })).entries;
		for (let place = 1; place <= 5; place++)
			for (const digit of '0123456789') {
				const here = entries.filter((entry) => entry.kit[place] === digit);
				if (here.length < 100) continue;
				const share = here.filter((entry) => entry.arm === 'a').length / here.length;
				// Five standard errors of a fair share; the seed is fixed.
				expect(Math.abs(share - 0.5)).toBeLessThan((5 * 0.5) / Math.sqrt(here.length));
			}
	});

	it('are read as people type them, and refused when a digit is wrong', () => {
		const kit = makeList(plan()).entries[0]!.kit;
		const digits = kit.slice(1).replace('-', '');
		for (const text of [digits, ` ${kit.toLowerCase()} `, kit.replace('-', ' ')])
			expect(readKitNumber(text)).toEqual({ ok: true, value: kit });
		const wrong = `${digits.slice(0, -1)}${(Number(digits.at(-1)) + 1) % 10}`;
		expect(readKitNumber(wrong)).toMatchObject({ problem: { code: 'KIT_NUMBER_CHECK_DIGIT' } });
		expect(readKitNumber('K12')).toMatchObject({ problem: { code: 'KIT_NUMBER_SHAPE' } });
	});
});

describe('strata', () => {
	const strata = [
		{
			key: 'sex',
			name: 'Sex',
			levels: [
				{ key: 'female', name: 'F' },
				{ key: 'male', name: 'M' }
			]
		},
		{
			key: 'age',
			name: 'Age',
			levels: [
				{ key: 'young', name: 'Y' },
				{ key: 'old', name: 'O' }
			]
		}
	];
	const sites = ['01', '02'].map((code) => ({
		code,
		name: code,
		zone: 'UTC',
		openingHours: [],
		rooms: []
	}));

	it('are every combination of levels, under one key whatever the order', () => {
		const keys = stratumKeys({ strata, sites, stratifyBySite: true });
		expect(keys).toHaveLength(8);
		expect(keys).toContain('age=old|sex=male|site=02');
		expect(stratumKey({ site: '02', sex: 'male', age: 'old' })).toBe('age=old|sex=male|site=02');
		expect(stratumKeys({ strata, sites, stratifyBySite: false })).toHaveLength(4);
		expect(stratumKeys({ strata: [], sites, stratifyBySite: false })).toEqual(['all']);
		expect(stratumKey({})).toBe('all');
	});
});
