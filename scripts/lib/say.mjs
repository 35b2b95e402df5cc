// What the scripts say, and how trouble becomes one clear line.

const started = process.hrtime.bigint();
const elapsed = () =>
	`${(Number(process.hrtime.bigint() - started) / 1e9).toFixed(1)} s`.padStart(8);

// Whoever reads may stop reading (`npm run trace | head`): that is no fault.
process.stdout.on('error', (error) => {
	if (/** @type {NodeJS.ErrnoException} */ (error).code === 'EPIPE') process.exit();
	throw error;
});

/** A line with the time since the start. @param {string} line */
export function say(line) {
	process.stdout.write(`${elapsed()}  ${line}\n`);
}

/** A line as it is. @param {string} [line] */
export function print(line = '') {
	process.stdout.write(`${line}\n`);
}

/** Something a person can put right: its message is the whole of what is shown. */
export class Trouble extends Error {}

/** @typedef {{ code?: string, message?: string, path?: string, stderr?: unknown }} Failure */

/**
 * One clear line for an error that comes from the machine, or null when it is none of those known.
 * @param {unknown} error
 * @returns {string | null}
 */
export function explain(error) {
	const failure = /** @type {Failure} */ (error ?? {});
	const text = `${failure.message ?? ''}\n${failure.stderr ?? ''}`;
	const code = failure.code;
	if (
		code === 'ENOSPC' ||
		code === '53100' ||
		/no space left on device|ENOSPC|could not (extend|write to) file/i.test(text)
	)
		return 'The disk is full. What was saved before is whole; free some space and start again.';
	if (code === 'EDQUOT' || /disk quota exceeded/i.test(text))
		return 'Your disk quota is used up. What was saved before is whole; free some space and start again.';
	if (code === 'EROFS' || /read-only file system/i.test(text))
		return `The file system is read-only${failure.path ? ` (${failure.path})` : ''}.`;
	if (code === 'EACCES' || code === 'EPERM')
		return `You may not write to ${failure.path ?? 'a file that is needed'}. Run this as the owner of the folder, or copy the folder.`;
	if (
		code === 'ENOTFOUND' ||
		code === 'EAI_AGAIN' ||
		/ENOTFOUND|EAI_AGAIN|ENETUNREACH|ETIMEDOUT|ECONNREFUSED.*registry|network request to .* failed|Temporary failure resolving|Could not resolve|Could not connect to|Failed to fetch|Unable to connect to/i.test(
			text
		)
	)
		return 'The network cannot be reached, and something has yet to be downloaded. Connect and start again; nothing was lost.';
	if (code === 'ECONNREFUSED') return 'The database does not answer.';
	return null;
}

/**
 * Runs a script's main function; trouble is printed as one line, a fault with its stack; status 1 either way.
 * @param {() => Promise<number | void>} main
 */
export async function run(main) {
	try {
		process.exitCode = (await main()) || 0;
	} catch (error) {
		const line = error instanceof Trouble ? error.message : explain(error);
		process.stderr.write(`\n${line ?? (error instanceof Error ? error.stack : String(error))}\n`);
		process.exitCode = 1;
	}
}
