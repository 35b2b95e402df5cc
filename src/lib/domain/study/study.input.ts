import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { isZone } from '$lib/time/zones';

// eslint-disable-next-line no-control-regex
const oneLine = /^[^\u0000-\u001f\u007f]*$/;
const line = (most: number, missing: string) =>
	z
		.string()
		.trim()
		.min(1, missing)
		.max(most, `At most ${most} characters.`)
		.regex(oneLine, 'Use one line of plain text.');
const zone = z
	.string()
	.trim()
	.max(64, 'Choose a time zone of the list.')
	.refine(isZone, 'Give a time zone by its name, such as Europe/Berlin.');
const date = z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.');
const code = z
	.string()
	.trim()
	.toUpperCase()
	.regex(
		/^[A-Z0-9][A-Z0-9-]{1,19}$/,
		'A study code has 2 to 20 capital letters, digits and hyphens.'
	);
const name = line(200, 'Enter a name.');
const template = z
	.string()
	.max(60)
	.regex(/^[a-z0-9-]+$/, 'Choose a template.');

const siteInput = z.strictObject({
	name: line(100, 'Name the site.'),
	zone,
	/** Names of rooms; without them the template's rooms are taken. */
	rooms: z.array(line(80, 'Name the room.')).min(1).max(100).optional()
});

/** A new study from a template: what differs from the file. */
export const createStudyInput = z.strictObject({
	template,
	code,
	name,
	masked: z.boolean(),
	training: z.boolean(),
	sites: z.array(siteInput).min(1, 'A study needs a site.').max(99),
	/** The day from which the template's consent form may be used; the template's own day without it. */
	consentApprovedOn: date.optional(),
	plannedSubjects: z
		.number('Give a whole number.')
		.int('Give a whole number.')
		.min(1, 'At least one.')
		.max(100_000, 'At most 100,000.')
		.optional()
});
export type CreateStudyInput = z.output<typeof createStudyInput>;

/** A new study from nothing. */
/** As a program says it: capital letters. A form takes small ones too. */
const exactCode = z
	.string()
	.regex(
		/^[A-Z0-9][A-Z0-9-]{1,19}$/,
		'A study code has 2 to 20 capital letters, digits and hyphens.'
	);

export const createBlankInput = z.strictObject({
	code: exactCode,
	name,
	training: z.boolean().default(false)
});
export const createBlankForm = createBlankInput.extend({ code });
export type CreateBlankInput = z.output<typeof createBlankInput>;

/** What is said beside a file: another code than the file’s own, so that one study can begin from another. */
export const createFromFileInput = z.strictObject({
	code: code.optional(),
	training: z.stringbool().default(false)
});

/** The same as a form says it: sites as two columns of fields, of which empty rows do not count. */
export const createStudyForm = z.object({
	template,
	code,
	name,
	masked: z.boolean().default(false),
	training: z.boolean().default(false),
	siteName: z.array(z.string().trim().max(100, 'At most 100 characters.').regex(oneLine)).max(99),
	siteZone: z.array(z.string().trim().max(64)).max(99),
	consentApprovedOn: date,
	plannedSubjects: z.coerce
		.number('Give a whole number.')
		.int('Give a whole number.')
		.min(1, 'At least one.')
		.max(100_000, 'At most 100,000.')
});

export const publishInput = z.object({
	version: z.coerce.number().int().min(1).max(1_000_000_000)
});
