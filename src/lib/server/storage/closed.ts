import { createCipheriv, createDecipheriv, randomBytes } from 'node:crypto';
import { folderStorage } from './folder';

/**
 * The closed storage area holds ciphertext only. Each file has a key of its own, and that key stands in the closed schema:
 * whoever can list the files learns their sizes, and nothing else. Sizes are rounded up, so that they tell no arm.
 */
const algorithm = 'aes-256-gcm';
const block = 64 * 1024;

export function seal(bytes: Buffer): { key: Buffer; sealed: Buffer } {
	const key = randomBytes(32);
	const nonce = randomBytes(12);
	const length = Buffer.alloc(8);
	length.writeBigUInt64BE(BigInt(bytes.length));
	const padded = Buffer.concat([
		length,
		bytes,
		Buffer.alloc((block - ((bytes.length + 8) % block)) % block)
	]);
	const cipher = createCipheriv(algorithm, key, nonce);
	const body = Buffer.concat([cipher.update(padded), cipher.final()]);
	return { key, sealed: Buffer.concat([nonce, cipher.getAuthTag(), body]) };
}

export function unseal(sealed: Buffer, key: Buffer): Buffer {
	const decipher = createDecipheriv(algorithm, key, sealed.subarray(0, 12));
	decipher.setAuthTag(sealed.subarray(12, 28));
	const padded = Buffer.concat([decipher.update(sealed.subarray(28)), decipher.final()]);
	return padded.subarray(8, 8 + Number(padded.readBigUInt64BE(0)));
}

export const closedArea = (folder: string) => folderStorage(folder);
