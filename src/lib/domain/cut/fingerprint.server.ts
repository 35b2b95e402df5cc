import { createHash } from 'node:crypto';

/** SHA-256 of the text’s UTF-8 bytes, as 64 hexadecimal digits. The same as `fingerprint`, without waiting. */
export function fingerprintNow(text: string): string {
	return createHash('sha256').update(text, 'utf8').digest('hex');
}

/** A fingerprint over text that comes in pieces, for content too large to hold at once. */
export function fingerprintOf(pieces: Iterable<string>): string {
	const hash = createHash('sha256');
	for (const piece of pieces) hash.update(piece, 'utf8');
	return hash.digest('hex');
}
