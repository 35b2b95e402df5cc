import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';

const date = z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.');
const version = z.coerce.number().int().min(1).max(1_000_000_000);
const id = z.uuid('Choose one of the list.');

export const approvalInput = z.strictObject({ approvedOn: date });
export type ApprovalInput = z.output<typeof approvalInput>;
export const approvalForm = approvalInput.extend({ siteId: id, version });

export const mostClosures = 200;

const reason = z
	.string()
	.trim()
	.min(1, 'Say why.')
	.max(100, 'At most 100 characters.')
	// eslint-disable-next-line no-control-regex
	.regex(/^[^\u0000-\u001f\u007f]*$/, 'Use one line of plain text.');

/** First and last day, both included. */
export const closureInput = z.strictObject({ from: date, to: date, reason });
export type ClosureInput = z.output<typeof closureInput>;
export const closureForm = closureInput.extend({ siteId: id, version });

export const reopenInput = z.strictObject({ from: date, to: date });
export type ReopenInput = z.output<typeof reopenInput>;
export const reopenForm = reopenInput.extend({ siteId: id, version });
