import { z } from 'zod';
import { meaningKeys, recordKinds } from './signature';

const password = z.string().min(1, 'Enter your password.').max(256, 'At most 256 characters.');
const email = z.string().trim().max(254, 'At most 254 characters.');

/** One record as it was shown: its hash says what was seen. */
export const signItem = z.strictObject({
	record: z.enum(recordKinds, 'This kind of record is not signed.'),
	recordId: z.uuid('This is no record.'),
	meaning: z.enum(meaningKeys, 'Choose what the signature means.'),
	sha256: z.string().length(64, 'Send the hash of what was shown.')
});

export const mostAtOnce = 100;

export const signInput = z.strictObject({
	items: z
		.array(signItem)
		.min(1, 'Choose at least one record.')
		.max(mostAtOnce, `At most ${mostAtOnce} at once.`),
	/** Asked for the first signature after signing in or unlocking. */
	email: email.optional(),
	password
});
export type SignInput = z.output<typeof signInput>;
export type SignItem = z.output<typeof signItem>;

const chosen = z
	.string()
	.max(200)
	.transform((text) => {
		const [record, recordId, meaning, sha256] = text.split('|');
		return { record, recordId, meaning, sha256 };
	})
	.pipe(signItem);

/** The same as a form says it: each ticked box is one record with its meaning and its hash. */
export const signForm = z.object({
	items: z
		.array(z.string().max(200))
		.min(1, 'Tick at least one record.')
		.max(mostAtOnce, `At most ${mostAtOnce} at once.`)
		.refine(
			(all) => all.every((text) => chosen.safeParse(text).success),
			'Load the page again: what was ticked could not be read.'
		)
		.default([]),
	email: email.default(''),
	password
});
export const boxValue = (item: SignItem): string =>
	[item.record, item.recordId, item.meaning, item.sha256].join('|');
export const signFromForm = (form: z.output<typeof signForm>): SignInput => ({
	items: form.items.map((text) => chosen.parse(text)),
	email: form.email,
	password: form.password
});

export const signatureView = z.object({
	id: z.uuid(),
	record: z.enum(recordKinds),
	recordId: z.uuid(),
	name: z.string(),
	role: z.string(),
	meaning: z.string(),
	at: z.iso.datetime({ offset: true }),
	when: z.string(),
	standing: z.enum(['stands', 'broken', 'damaged']),
	broken: z
		.object({ at: z.iso.datetime({ offset: true }), when: z.string(), by: z.string() })
		.nullable(),
	sha256: z.string()
});
export type SignatureView = z.output<typeof signatureView>;

const lines = z.array(z.object({ label: z.string(), value: z.string() }));
export const signatureDetail = signatureView.extend({
	title: z.string(),
	lines,
	differences: z.array(
		z.object({ label: z.string(), before: z.string().nullable(), after: z.string().nullable() })
	)
});
export type SignatureDetail = z.output<typeof signatureDetail>;

export const waitingToSign = z.object({
	needs: z.enum(['address and password', 'password', 'a password of your own']),
	items: z.array(
		z.object({
			record: z.enum(recordKinds),
			recordId: z.uuid(),
			meaning: z.enum(meaningKeys),
			statement: z.string(),
			title: z.string(),
			place: z.string(),
			lines,
			sha256: z.string(),
			/** The signature that a later change broke. */
			broken: signatureView.nullable()
		})
	)
});
export type WaitingToSign = z.output<typeof waitingToSign>;
