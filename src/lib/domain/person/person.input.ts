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
const version = z.coerce.number().int().min(1).max(1_000_000_000);
// Length and guessability are the domain's to judge; this only bounds what is looked at.
const password = z.string().min(1, 'Enter a password.').max(512, 'At most 256 characters.');
const twice = { path: ['again'], message: 'The two entries are not the same.' };
const same = (given: { password: string; again: string }) => given.password === given.again;

export const signInInput = z.object({
	email: z.string().trim().min(1, 'Enter your e-mail address.').max(254),
	password: z.string().min(1, 'Enter your password.').max(256),
	to: z.string().max(500).default('/')
});
export const inviteInput = z.object({ email, name });
export const newPasswordInput = z
	.object({ password, again: z.string().max(512) })
	.refine(same, twice);
export const changePasswordInput = z
	.object({
		current: z.string().min(1, 'Enter your password.').max(512),
		password,
		again: z.string().max(512)
	})
	.refine(same, twice);
export const setUpInput = z
	.object({ email, name, password, again: z.string().max(512) })
	.refine(same, twice);
export const forgottenInput = z.object({ email });
export const grantInput = z.object({
	role: z.enum(roles, 'Choose a role.'),
	studyId: optionalId,
	siteId: optionalId,
	validFrom: date,
	validTo: optionalDate
});
/** Without a day the grant ends at once. */
export const endGrantInput = z.object({ grantId: id, version, validTo: optionalDate });
export const confirmGrantInput = z.object({ grantId: id, version });
export const activeInput = z.object({ active: z.enum(['yes', 'no']), version });
export const endSessionInput = z.object({ sessionId: id });
export const nothingInput = z.object({});

export type GrantInput = z.output<typeof grantInput>;

const personRow = z.object({
	id: z.string(),
	name: z.string(),
	email: z.string(),
	state: z.enum(['active', 'invited', 'off']),
	roles: z.array(z.string())
});
export const peopleOutput = z.object({
	items: z.array(personRow),
	nextCursor: z.string().nullable()
});
export type PersonRow = z.output<typeof personRow>;
