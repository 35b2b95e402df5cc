import { createHmac, randomBytes } from 'node:crypto';

/**
 * Repeatable random numbers from a recorded seed, with any number of streams that tell nothing of one another.
 *
 * Method “hmac-sha256-counter/1”: block i of a stream is HMAC-SHA-256 with the 32 seed bytes as key over
 * the stream's name in UTF-8, one zero byte, and i as 8 bytes, most significant first, i = 0, 1, 2, …
 * Each block gives eight 32-bit numbers, most significant byte first, in order.
 * A whole number below n is the next such number that is below the largest multiple of n in 2³², modulo n
 * (larger ones are skipped, so every outcome is equally likely).
 */
export const generatorMethod = 'hmac-sha256-counter/1';

export type Seed = string;

export const isSeed = (text: string): text is Seed => /^[0-9a-f]{64}$/.test(text);

/** A new seed from the platform's secure generator: 32 bytes as 64 hexadecimal digits. */
export const newSeed = (): Seed => randomBytes(32).toString('hex');

export type RandomStream = {
	/** A whole number from 0 to n − 1. */
	below(n: number): number;
	/** The items in random order (Fisher and Yates, from the last place down). */
	shuffled<T>(items: readonly T[]): T[];
	/** The next bytes of the stream, for checks against other programs. */
	block(): Buffer;
};

export function randomStream(seed: Seed, name: string): RandomStream {
	if (!isSeed(seed)) throw new RangeError('A seed has 64 hexadecimal digits');
	if (name.includes('\0')) throw new RangeError('A stream name holds no zero byte');
	const key = Buffer.from(seed, 'hex');
	const prefix = Buffer.from(`${name}\0`, 'utf8');
	let counter = 0n;
	let current = Buffer.alloc(0);
	let at = 0;

	function block(): Buffer {
		const index = Buffer.alloc(8);
		index.writeBigUInt64BE(counter);
		counter += 1n;
		return createHmac('sha256', key).update(prefix).update(index).digest();
	}

	function next(): number {
		if (at >= current.length) {
			current = block() as Buffer<ArrayBuffer>;
			at = 0;
		}
		const value = current.readUInt32BE(at);
		at += 4;
		return value;
	}

	function below(n: number): number {
		if (!Number.isSafeInteger(n) || n < 1 || n > 2 ** 32) throw new RangeError(`Not a range: ${n}`);
		const limit = 2 ** 32 - (2 ** 32 % n);
		let value = next();
		while (value >= limit) value = next();
		return value % n;
	}

	function shuffled<T>(items: readonly T[]): T[] {
		const order = [...items];
		for (let last = order.length - 1; last > 0; last--) {
			const other = below(last + 1);
			[order[last], order[other]] = [order[other] as T, order[last] as T];
		}
		return order;
	}

	return { below, shuffled, block };
}
