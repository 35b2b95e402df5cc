import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { exitKinds } from './exit';

// eslint-disable-next-line no-control-regex
const oneLine = /^[^\u0000-\u001f\u007f]*$/;
const id = z.uuid('Choose one of the list.');
const date = z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.');
const version = z.coerce.number().int().min(1).max(1_000_000_000);
const key = z.string().min(1).max(40);

export const screeningInput = z.strictObject({ siteId: id, screenedOn: date });
export type ScreeningInput = z.output<typeof screeningInput>;

/** Yes or no to each criterion, by its key; what is not answered yet is left out. */
export const eligibilityInput = z.strictObject({
	answers: z.record(key, z.enum(['yes', 'no'], 'Answer yes or no.'))
});
export type EligibilityInput = z.output<typeof eligibilityInput>;

export const notEnteredInput = z.strictObject({
	reason: z.string().trim().min(1, 'Say why.').max(500, 'At most 500 characters.')
});
export const notEnteredForm = notEnteredInput.extend({ version });

/** A choice of which a form must not take the first by itself. */
const chosen = (of: readonly string[], said: string) =>
	z
		.string()
		.max(60)
		.default('')
		.refine((text): boolean => of.includes(text), said);

const contact = {
	name: z
		.string()
		.trim()
		.min(1, 'Enter the name.')
		.max(120, 'At most 120 characters.')
		.regex(oneLine, 'A name is one line of text.'),
	email: z.union([
		z.literal(''),
		z
			.string()
			.trim()
			.max(254, 'At most 254 characters.')
			.pipe(z.email('Enter an e-mail address, such as name@example.org.'))
	]),
	phone: z
		.string()
		.trim()
		.max(40, 'At most 40 characters.')
		.regex(/^[0-9+()/ .-]*$/, 'Use digits, spaces and + ( ) / . - only.'),
	language: z.enum(['en', 'de'], 'Choose a language.')
};
export const contactInput = z.strictObject({
	...contact,
	email: contact.email.default(''),
	phone: contact.phone.default(''),
	language: contact.language.default('en')
});
export type ContactInput = z.output<typeof contactInput>;
/** Version 0: there are no contact details yet. */
export const contactForm = contactInput.extend({
	version: z.coerce.number().int().min(0).max(1_000_000_000)
});

export const enrolInput = z.strictObject({
	enrolledOn: date,
	/** The level of each stratification factor, by the factor's key. The site, where it counts as one, is known. */
	stratum: z.record(key, key).default({}),
	/** Keys of choices, numbers in the definition's unit, birth dates as far as known (2016, 2016-04, 2016-04-30). */
	characteristics: z.record(key, z.union([z.string().max(40), z.number()])).default({}),
	contact: contactInput.nullish()
});
export type EnrolInput = z.output<typeof enrolInput>;

export const exitInput = z.strictObject({
	kind: z.enum(exitKinds, 'Choose what happened.'),
	happenedOn: date,
	/** Never demanded: nobody has to say why. */
	reason: z.string().trim().max(500, 'At most 500 characters.').default('')
});
export type ExitInput = z.output<typeof exitInput>;
export const exitForm = z.object({
	...exitInput.shape,
	kind: chosen(exitKinds, 'Choose what happened.')
});

/** An entry taken back: it stays, marked. */
export const takeBackInput = z.strictObject({
	exitId: id,
	because: z.enum(['entered by mistake', 'changed mind'], 'Say which of the two it is.'),
	reason: z.string().trim().min(1, 'Say why.').max(500, 'At most 500 characters.')
});
export type TakeBackInput = z.output<typeof takeBackInput>;

export const transferInput = z.strictObject({
	siteId: id,
	transferredOn: date,
	reason: z.string().trim().min(1, 'Say why.').max(500, 'At most 500 characters.')
});
export type TransferInput = z.output<typeof transferInput>;

/** A name to look for, or the beginning of any of its words. */
export const contactSearchInput = z.strictObject({
	name: z
		.string()
		.trim()
		.max(120, 'At most 120 characters.')
		.refine((text) => (text.match(/\p{L}/gu) ?? []).length >= 2, 'Enter two letters or more.')
});
export type ContactSearchInput = z.output<typeof contactSearchInput>;

export const threadsQuery = z.object({
	site: z.union([z.literal(''), z.uuid()]).optional(),
	search: z.string().trim().max(40).optional(),
	sort: z.enum(['number', 'enrolled']).default('number'),
	order: z.enum(['up', 'down']).default('up'),
	cursor: z.string().max(200).optional(),
	limit: z.coerce.number().int().min(1).max(100).default(40)
});
export type ThreadsQuery = z.output<typeof threadsQuery>;

export const screeningsQuery = z.object({
	site: z.union([z.literal(''), z.uuid()]).optional(),
	cursor: z.union([z.literal(''), z.uuid()]).optional(),
	limit: z.coerce.number().int().min(1).max(100).default(50)
});
export type ScreeningsQuery = z.output<typeof screeningsQuery>;
