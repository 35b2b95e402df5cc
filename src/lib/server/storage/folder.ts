import { mkdir, open, readFile, rename } from 'node:fs/promises';
import { dirname, join } from 'node:path';
import { newToken } from '$lib/id';
import { checkedKey, type Storage } from './storage';

/** Files in a folder. A file is whole or not there: it is written beside its place, made durable, then moved. */
export function folderStorage(folder: string): Storage {
	return {
		async put(key, bytes) {
			const place = join(folder, checkedKey(key));
			await mkdir(dirname(place), { recursive: true, mode: 0o700 });
			const beside = `${place}.${newToken(16)}.part`;
			const file = await open(beside, 'wx', 0o600);
			try {
				await file.writeFile(bytes);
				await file.sync();
			} finally {
				await file.close();
			}
			await rename(beside, place);
		},
		get: async (key) => readFile(join(folder, checkedKey(key)))
	};
}
