import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';

const date = z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.');
const dateOrNone = z.union([z.literal(''), date]);

/** What an amendment is about, in a sentence or two for who reads the list of versions. */
export const amendmentInput = z.strictObject({
	summary: z
		.string()
		.trim()
		.min(1, 'Say what the amendment is about.')
		.max(2000, 'At most 2,000 characters.')
});
export type AmendmentInput = z.output<typeof amendmentInput>;

export const publishAmendmentInput = z.strictObject({
	approvedOn: dateOrNone.default(''),
	/** Left out, a new consent form means yes. */
	reconsent: z.enum(['', 'yes', 'no'], 'Say yes or no.').default(''),
	/** The day by which everybody should have been asked; a month from publication without it. */
	reconsentBy: dateOrNone.default('')
});
export type PublishAmendmentInput = z.output<typeof publishAmendmentInput>;
export const publishAmendmentForm = publishAmendmentInput.extend({
	version: z.coerce.number().int().min(1).max(1_000_000_000)
});
