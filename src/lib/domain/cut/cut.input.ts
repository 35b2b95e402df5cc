import { z } from 'zod';

const local = /^\d{4}-\d{2}-\d{2}T\d{2}:\d{2}(:\d{2}(\.\d{1,3})?)?$/;
const withOffset = /(Z|[+-]\d{2}:\d{2})$/;

/** An instant as people type it (taken as UTC) or as programs send it; null when there is no such moment. */
export function instantOf(text: string): Date | null {
	const zoned = local.test(text) ? `${text}Z` : text;
	if (!/^\d{4}-\d{2}-\d{2}T/.test(zoned) || !withOffset.test(zoned)) return null;
	const at = new Date(zoned);
	if (Number.isNaN(at.getTime())) return null;
	// 30 February is read as 2 March: such a day is refused instead.
	const day = new Date(`${text.slice(0, 10)}T00:00:00Z`);
	return day.toISOString().slice(0, 10) === text.slice(0, 10) ? at : null;
}

const isInstantOrEmpty = (text: string) => {
	try {
		return text === '' || instantOf(text) !== null;
	} catch {
		return false;
	}
};

export const cutInput = z.strictObject({
	label: z
		.string()
		.trim()
		.min(1, 'Give the cut a name.')
		.max(120, 'Use at most 120 characters.')
		.meta({ description: 'What people call this cut.' }),
	cutOffAt: z
		.string()
		.trim()
		.max(40, 'That is no moment.')
		.refine(isInstantOrEmpty, 'Give a day and time that exist: 2026-06-01T06:00.')
		.default('')
		.meta({ description: 'ISO 8601; without an offset it is UTC. Empty: this moment.' })
});
export type CutInput = z.output<typeof cutInput>;
