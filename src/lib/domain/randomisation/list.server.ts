import { canonical, type Json } from '../cut/canonical';
import { fingerprintNow } from '../cut/fingerprint.server';
import { generatorMethod, isSeed, randomStream, type Seed } from './generator.server';
import { kitNumber, type KitNumber } from './kit';
import type { StratumKey } from './strata';

/**
 * Stratified permuted blocks. In each stratum the list is a row of blocks; each block's size is drawn from the given
 * sizes, holds the arms in the exact ratio, and is put in random order. Everything here belongs to the closed part of
 * the program: no seed, block or unused entry is for anyone who enrols, treats or assesses.
 */
export type ListPlan = {
	arms: readonly { key: string; ratio: number }[];
	strata: readonly StratumKey[];
	/** Sizes blocks may have; each a multiple of the sum of the ratios. */
	blockSizes: readonly number[];
	/** Entries to make in each stratum; the last block is always whole, so there may be a few more. */
	perStratum: number;
	seed: Seed;
};

export type ListEntry = {
	stratum: StratumKey;
	/** 1, 2, 3, … in the order entries are given out within the stratum. */
	position: number;
	/** 1, 2, 3, … within the stratum. */
	block: number;
	blockSize: number;
	arm: string;
	kit: KitNumber;
};

export type AllocationList = {
	method: string;
	entries: ListEntry[];
	count: number;
	/** SHA-256 of the canonical content, in hexadecimal. */
	hash: string;
};

export const listMethod = `stratified-permuted-blocks/1 with ${generatorMethod}`;

const mostEntries = 200_000;

function checkPlan(plan: ListPlan): void {
	const sum = plan.arms.reduce((total, arm) => total + arm.ratio, 0);
	if (plan.arms.length < 2) throw new RangeError('A list needs at least two arms');
	if (new Set(plan.arms.map((arm) => arm.key)).size !== plan.arms.length)
		throw new RangeError('Two arms have the same key');
	if (plan.arms.some((arm) => !Number.isSafeInteger(arm.ratio) || arm.ratio < 1))
		throw new RangeError('Ratios are whole numbers from 1');
	if (plan.blockSizes.length === 0) throw new RangeError('A list needs a block size');
	for (const size of plan.blockSizes)
		if (!Number.isSafeInteger(size) || size < sum || size % sum !== 0)
			throw new RangeError(
				`A block of ${size} cannot hold the ratio: it must be a multiple of ${sum}`
			);
	if (!Number.isSafeInteger(plan.perStratum) || plan.perStratum < 1)
		throw new RangeError('A stratum needs at least one entry');
	if (plan.strata.length === 0 || new Set(plan.strata).size !== plan.strata.length)
		throw new RangeError('Strata must be there and differ');
	if (plan.strata.length * plan.perStratum > mostEntries)
		throw new RangeError(`A list has at most ${mostEntries} entries`);
	if (!isSeed(plan.seed)) throw new RangeError('A seed has 64 hexadecimal digits');
}

/**
 * The list that follows from the plan and its seed. Sizes, orders and kit numbers come from separate streams, so that
 * how long the list is and which kits stand where depend on nothing about the arms.
 */
export function makeList(plan: ListPlan): AllocationList {
	checkPlan(plan);
	const sum = plan.arms.reduce((total, arm) => total + arm.ratio, 0);
	const sizes = [...new Set(plan.blockSizes)].sort((a, b) => a - b);
	const bare: Omit<ListEntry, 'kit'>[] = [];
	for (const stratum of [...plan.strata].sort()) {
		const sizeStream = randomStream(plan.seed, `block sizes: ${stratum}`);
		const orderStream = randomStream(plan.seed, `block orders: ${stratum}`);
		let position = 0;
		for (let block = 1; position < plan.perStratum; block++) {
			const blockSize = sizes[sizeStream.below(sizes.length)] as number;
			const arms = plan.arms.flatMap((arm) =>
				Array.from({ length: (blockSize / sum) * arm.ratio }, () => arm.key)
			);
			for (const arm of orderStream.shuffled(arms)) {
				position += 1;
				bare.push({ stratum, position, block, blockSize, arm });
			}
		}
	}
	const kits = kitNumbers(plan.seed, bare.length);
	const entries = bare.map((entry, at) => ({ ...entry, kit: kits[at] as KitNumber }));
	return { method: listMethod, entries, count: entries.length, hash: hashOfList(entries) };
}

/** `count` different kit numbers in random order, spread thinly over their range so that a neighbour cannot be guessed. */
export function kitNumbers(seed: Seed, count: number): KitNumber[] {
	const digits = Math.max(5, String(count * 10).length);
	const [low, high] = [10 ** (digits - 1), 10 ** digits];
	const stream = randomStream(seed, 'kit numbers');
	const used = new Set<number>();
	while (used.size < count) used.add(low + stream.below(high - low));
	return [...used].map((running) => kitNumber(running, digits));
}

/** The text the hash is over: the entries in order, by RFC 8785. The seed is not in it. */
export function canonicalList(entries: readonly ListEntry[]): string {
	return canonical({ method: listMethod, entries: entries as unknown as Json });
}

export function hashOfList(entries: readonly ListEntry[]): string {
	return fingerprintNow(canonicalList(entries));
}
