import { createHash } from 'node:crypto';
import { config } from '../config';
import { folderStorage } from './folder';

/** Where files lie: a folder on this machine, or an object store. Keys are made here, never by a user. */
export interface Storage {
	put(key: string, bytes: Buffer, type: string): Promise<void>;
	get(key: string): Promise<Buffer>;
}

export const sha256Of = (bytes: Buffer): string => createHash('sha256').update(bytes).digest('hex');

const keyShape = /^[a-z0-9-]+(\/[a-z0-9-]+)*(\.[a-z0-9]+)?$/;

/** A key that leaves its folder, or holds anything but its own few characters, is a fault of ours. */
export function checkedKey(key: string): string {
	if (!keyShape.test(key) || key.length > 200) throw new Error('Not a storage key');
	return key;
}

let opened: Promise<Storage> | undefined;

/** The open storage area of this process. */
export function storage(): Promise<Storage> {
	opened ??= (async () => {
		const { storage: wanted } = config();
		if (wanted.kind === 'folder') return folderStorage(wanted.folder);
		// Loaded only where it is used: its code is large.
		const { s3Storage } = await import('./s3');
		return s3Storage(wanted);
	})();
	return opened;
}

export function forgetStorage(): void {
	opened = undefined;
}
