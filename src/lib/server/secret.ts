import { createCipheriv, createDecipheriv, createHash, randomBytes } from 'node:crypto';
import { config } from './config';

/** A token as the database keeps it: its hash alone. */
export const tokenHash = (token: string): Buffer => createHash('sha256').update(token).digest();

/** Text that must be sent later and may not lie open meanwhile (a link in a waiting mail). */
export const wrap = (text: string): Buffer => wrapBytes(Buffer.from(text, 'utf8'));

export const unwrap = (wrapped: Buffer): string => unwrapBytes(wrapped).toString('utf8');

/** A file that names somebody, as it lies in the store: whoever can list the store learns its size and nothing else. */
export function wrapBytes(bytes: Buffer): Buffer {
	const nonce = randomBytes(12);
	const cipher = createCipheriv('aes-256-gcm', config().key, nonce);
	const body = Buffer.concat([cipher.update(bytes), cipher.final()]);
	return Buffer.concat([nonce, cipher.getAuthTag(), body]);
}

export function unwrapBytes(wrapped: Buffer): Buffer {
	const decipher = createDecipheriv('aes-256-gcm', config().key, wrapped.subarray(0, 12));
	decipher.setAuthTag(wrapped.subarray(12, 28));
	return Buffer.concat([decipher.update(wrapped.subarray(28)), decipher.final()]);
}
