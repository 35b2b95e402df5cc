import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { roles } from './roles';

const email = z
	.string()
	.trim()
	.toLowerCase()
	.max(254, 'An e-mail address has at most 254 characters.')
	.pipe(z.email('Enter an e-mail address, such as name@example.org.'));
const name = z
	.string()
	.trim()
	.min(1, 'Enter a name.')
	.max(120, 'At most 120 characters.')
	// eslint-disable-next-line no-control-regex
	.regex(/^[^\u0000-\u001f\u007f]*$/, 'A name is one line of text.');
const id = z.uuid('Choose one of the list.');
const date = z.string().refine(isPlainDate, 'Enter a date that exists.');
const optionalDate = z.union([z.literal(''), date]).optional();
const optionalId = z.union([z.literal(''), id]).optional();

export const signInInput = z.object({
	email: z.string().trim().min(1, 'Enter your e-mail address.').max(254),
	password: z.string().min(1, 'Enter your password.').max(256),
	to: z.string().max(500).default('/')
});
export const inviteInput = z.object({ email, name });
export const newPasswordInput = z.object({
	password: z.string().max(256, 'At most 256 characters.'),
	again: z.string().max(256)
});
export const setUpInput = z.object({
	email,
	name,
	password: z.string().max(256, 'At most 256 characters.'),
	again: z.string().max(256)
});
export const forgottenInput = z.object({ email });
export const grantInput = z.object({
	role: z.enum(roles, 'Choose a role.'),
	studyId: optionalId,
	siteId: optionalId,
	validFrom: date,
	validTo: optionalDate
});
export const endGrantInput = z.object({
	grantId: id,
	version: z.coerce.number().int(),
	validTo: date
});
export const confirmGrantInput = z.object({ grantId: id });
export const activeInput = z.object({
	active: z.enum(['yes', 'no']),
	version: z.coerce.number().int()
});
