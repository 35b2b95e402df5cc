import { clock } from './time/clock';

/**
 * The one generator of identifiers. Ids are UUID version 7 (RFC 9562 §5.7): ordered by the time they were made,
 * otherwise random, so that nothing in them says what they stand for. Works in the browser and in Node.
 */
export type Id = string;

type Fill = (bytes: Uint8Array<ArrayBuffer>) => Uint8Array<ArrayBuffer>;

const secure: Fill = (bytes) => globalThis.crypto.getRandomValues(bytes);

/** A repeatable stream of bytes (SplitMix32). For tests and the demo's ids only: it is no secret generator. */
function repeatable(seed: number): Fill {
	let state = seed >>> 0;
	return (bytes) => {
		for (let at = 0; at < bytes.length; at++) {
			state = (state + 0x9e3779b9) >>> 0;
			let mixed = state;
			mixed = Math.imul(mixed ^ (mixed >>> 16), 0x21f0aaad);
			mixed = Math.imul(mixed ^ (mixed >>> 15), 0x735a2d97);
			bytes[at] = (mixed ^ (mixed >>> 15)) >>> 24;
		}
		return bytes;
	};
}

let fillId = secure;
let fillToken = secure;
let lastMs = -1;
let counter = 0;

export const ids = {
	/** From here on ids follow from `seed` and the clock alone. */
	seed(seed: number): void {
		fillId = repeatable(seed);
		lastMs = -1;
		counter = 0;
	},
	reset(): void {
		fillId = secure;
		lastMs = -1;
		counter = 0;
	}
};

/** Secrets are never repeatable, except inside the test runner. */
export const tokens = {
	seedForTests(seed: number): void {
		if (!globalThis.process?.env?.VITEST)
			throw new Error('Tokens may be seeded in unit tests only');
		fillToken = repeatable(seed);
	},
	reset(): void {
		fillToken = secure;
	}
};

function uuid(bytes: Uint8Array, version: 4 | 7): Id {
	bytes[6] = ((bytes[6] ?? 0) & 0x0f) | (version << 4);
	bytes[8] = ((bytes[8] ?? 0) & 0x3f) | 0x80;
	const hex = Array.from(bytes, (byte) => byte.toString(16).padStart(2, '0')).join('');
	return `${hex.slice(0, 8)}-${hex.slice(8, 12)}-${hex.slice(12, 16)}-${hex.slice(16, 20)}-${hex.slice(20)}`;
}

/** A new UUIDv7. Within one millisecond a counter in rand_a keeps the order (RFC 9562 §6.2, method 1). */
export function newId(): Id {
	const bytes = fillId(new Uint8Array(16));
	let ms = clock.now().getTime();
	// Up to a second behind counts as the same moment: borrowed milliseconds, or a clock stepped back a little.
	if (ms <= lastMs && lastMs - ms < 1000) {
		ms = lastMs;
		counter += 1;
		if (counter > 0xfff) {
			ms += 1;
			counter = 0;
		}
	} else {
		// Starts low so that at least 2,000 ids fit before the counter borrows the next millisecond.
		counter = (((bytes[6] ?? 0) & 0x07) << 8) | (bytes[7] ?? 0);
	}
	lastMs = ms;
	for (let at = 0; at < 6; at++) bytes[at] = Math.floor(ms / 2 ** (8 * (5 - at))) % 256;
	bytes[6] = counter >>> 8;
	bytes[7] = counter & 0xff;
	return uuid(bytes, 7);
}

/** A new UUIDv4: wholly random, for names that strangers see (calendar UIDs) and that should tell no time. */
export function newRandomId(): Id {
	return uuid(fillId(new Uint8Array(16)), 4);
}

/** A new secret of `bytes` random bytes as base64url text (32 bytes: 43 characters, 256 bits). */
export function newToken(bytes = 32): string {
	if (!Number.isSafeInteger(bytes) || bytes < 16)
		throw new RangeError('A token has at least 16 bytes');
	const raw = fillToken(new Uint8Array(bytes));
	let binary = '';
	for (const byte of raw) binary += String.fromCharCode(byte);
	return btoa(binary).replaceAll('+', '-').replaceAll('/', '_').replaceAll('=', '');
}

/** Whether the text is a lower-case UUID, as this generator writes them. */
export function isId(text: unknown): text is Id {
	return (
		typeof text === 'string' &&
		/^[0-9a-f]{8}-[0-9a-f]{4}-[1-8][0-9a-f]{3}-[89ab][0-9a-f]{3}-[0-9a-f]{12}$/.test(text)
	);
}
