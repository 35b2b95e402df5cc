import { z } from 'zod';
import { isPlainDate } from '$lib/time/dates';
import { minutesOfTime } from '$lib/time/zones';
import { assents } from './consent';

const id = z.uuid('Choose one of the list.');
const date = z.string().refine((text): boolean => isPlainDate(text), 'Enter a date that exists.');
const time = z
	.string()
	.refine(
		(text) => minutesOfTime(text) !== null && text !== '24:00',
		'Enter a time on a 24-hour clock: 09:30.'
	);
const line = (most: number) =>
	z
		.string()
		.trim()
		.max(most, `At most ${most} characters.`)
		.refine(
			(text) => ![...text].some((sign) => sign < ' ' || sign === '\u007f'),
			'Use one line of plain text.'
		)
		.default('');
const signers = ['participant', 'representative'] as const;
const noAssent = z.literal('');

/** Dates and times are those of the site's own clocks. */
const parts = {
	consentVersionId: id,
	signedOn: date,
	signedTime: time,
	explainedBy: id,
	/** When the person who explained signed. */
	obtainedOn: date,
	obtainedTime: time,
	/** Of the representative to the participant: mother, guardian. No name. */
	relationship: line(80),
	/** An impartial witness signed as well. */
	witnessed: z.boolean('Say whether a witness signed.').default(false),
	minor: z.boolean('Say whether the participant is a minor.').default(false),
	assentReason: line(500)
};
const copyNeeded = 'Give a copy of what was signed, then record the consent.';

interface Parts {
	signedBy: string;
	relationship: string;
	minor: boolean;
	assent: string;
	assentReason: string;
}

/** What the parts ask of each other. */
function whole(given: Parts, context: z.RefinementCtx): void {
	const say = (path: keyof Parts, message: string) =>
		context.addIssue({ code: 'custom', path: [path], message });
	if (given.signedBy === 'representative' && given.relationship === '')
		say('relationship', 'Say how the representative is related to the participant.');
	if (given.signedBy === 'participant' && given.relationship !== '')
		say('relationship', 'A participant who signs needs no representative.');
	if (given.minor && given.signedBy === 'participant')
		say('signedBy', 'For a minor a legally acceptable representative signs.');
	if (given.minor && given.assent === '') say('assent', 'Say whether the minor gave assent.');
	if (!given.minor && given.assent !== '') say('assent', 'Assent is asked of minors only.');
	if (given.assent === 'not able' && given.assentReason === '')
		say('assentReason', 'Say why the minor could not be asked.');
}

export const consentInput = z
	.strictObject({
		...parts,
		signedBy: z.enum(signers, 'Say who signed.'),
		assent: z.union([noAssent, z.enum(assents)], 'Say given, declined or not able.').default(''),
		copyGiven: z.boolean('Say whether a copy was given.').refine((given) => given, copyNeeded)
	})
	.superRefine(whole);
export type ConsentInput = z.output<typeof consentInput>;

/** A choice of which a form must not take the first by itself. */
const chosen = (of: readonly string[], said: string) =>
	z
		.string()
		.max(60)
		.default('')
		.refine((text): boolean => of.includes(text), said);

/** The same as a form says it: a box that is not ticked is not sent, and means no. */
export const consentForm = z
	.object({
		...parts,
		signedBy: chosen(signers, 'Say who signed.'),
		assent: z
			.string()
			.max(60)
			.default('')
			.refine((text) => text === '' || (assents as readonly string[]).includes(text)),
		copyGiven: z
			.boolean()
			.default(false)
			.refine((given) => given, copyNeeded)
	})
	.superRefine(whole);

const reason = z.string().trim().max(500, 'At most 500 characters.').default('');

/** A consent taken back before the person was entered. Nobody has to say why. */
export const withdrawConsentInput = z.strictObject({ consentId: id, withdrawnOn: date, reason });
export type WithdrawConsentInput = z.output<typeof withdrawConsentInput>;

export const refuseReconsentInput = z.strictObject({
	cause: z.enum(['amendment', 'majority'], 'Say what was asked.'),
	refusedOn: date,
	reason
});
export type RefuseReconsentInput = z.output<typeof refuseReconsentInput>;

export const reconsentsQuery = z.object({ site: z.union([z.literal(''), z.uuid()]).optional() });
