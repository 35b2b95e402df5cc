import { readFileSync } from 'node:fs';
import { BadInput } from './bad-input';

const reasons: Record<string, string> = {
	ENOENT: 'there is no such file',
	EISDIR: 'it is a folder',
	EACCES: 'it may not be read'
};

/** A file's text; `what` names it in a sentence. Errors: `BadInput`. */
export function readText(path: string, what: string): string {
	try {
		return readFileSync(path, 'utf8');
	} catch (error) {
		const { code = '', message } = error as NodeJS.ErrnoException;
		throw new BadInput(`The ${what} ${path} cannot be read: ${reasons[code] ?? message}.`);
	}
}

/** A file's JSON as it stands. Errors: `BadInput`. */
export function readJsonFile(path: string, what: string): unknown {
	const text = readText(path, what);
	try {
		return JSON.parse(text);
	} catch (error) {
		const why = (error as Error).message.replace(/\s+/g, ' ');
		throw new BadInput(`The ${what} ${path} is not JSON: ${why}.`);
	}
}
