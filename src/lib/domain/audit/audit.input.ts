import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { roles } from '../person/roles';
import { actions, auditRecords, historyRecords } from './words';

const text = (most: number) =>
	z
		.string()
		.trim()
		.max(most, `At most ${most} characters.`)
		.refine(
			(given) => !given.includes('\u0000'),
			'This text holds a character that cannot be kept.'
		);
const date = z.string().refine(isPlainDate, 'Enter a date that exists.');
const none = z.literal('');
const or = <S extends z.ZodType>(schema: S) => z.union([none, schema]).optional();

export const auditRoles = [...roles, 'system', 'own', 'none'] as const;

const filter = {
	from: or(date),
	to: or(date),
	who: text(120).optional(),
	role: or(z.enum(auditRoles, 'Choose a role of the list.')),
	record: or(z.enum(auditRecords as [string, ...string[]], 'Choose a record of the list.')),
	subject: text(40).optional(),
	action: or(z.enum(actions, 'Choose an action of the list.'))
};

export const auditFilterInput = z.strictObject(filter);
export type AuditFilter = z.output<typeof auditFilterInput>;

export const auditQuery = z.strictObject({
	...filter,
	cursor: z
		.string()
		.regex(/^\d{1,18}$/, 'This is no place in the list.')
		.optional(),
	limit: z.coerce.number().int().min(1).max(200).default(50)
});

/** For a page: what is not understood is left out instead of refused. */
export function filterFrom(parameters: URLSearchParams): AuditFilter {
	const found: Record<string, unknown> = {};
	for (const [name, schema] of Object.entries(filter)) {
		const parsed = schema.safeParse(parameters.get(name) ?? undefined);
		if (parsed.success && parsed.data) found[name] = parsed.data;
	}
	return found as AuditFilter;
}

export const historyQuery = z.strictObject({
	record: z.enum(historyRecords, 'Choose a record that has a history here.'),
	id: z.uuid('This is no record.')
});

const cell = z.union([z.string(), z.number()]).nullable();
export const auditEventOutput = z.object({
	id: z.string(),
	at: z.string(),
	when: z.string(),
	who: z.string(),
	role: z.string(),
	action: z.enum(actions),
	record: z.string(),
	recordId: z.string().nullable(),
	said: z.string(),
	site: z.string().nullable(),
	subject: z.string().nullable(),
	changes: z.array(z.object({ field: z.string(), before: cell, after: cell })),
	hidden: z.boolean(),
	reason: z.string().nullable(),
	requestId: z.string()
});
export type AuditEvent = z.output<typeof auditEventOutput>;
export const auditPageOutput = z.object({
	items: z.array(auditEventOutput),
	nextCursor: z.string().nullable()
});
