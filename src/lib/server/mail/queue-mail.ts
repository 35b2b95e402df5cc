import { newId, newRandomId } from '$lib/id';
import type { Writer } from '../change';
import { config } from '../config';
import type { MailKind } from '../db/tables';
import { wrap } from '../secret';

export interface NewMail {
	kind: MailKind;
	/** To an account … */
	personId?: string;
	/** … or to a subject, whose address stands with the contact details. */
	subjectId?: string;
	studyId?: string;
	siteId?: string;
	/** For calendar mails: what is invited to, moved or cancelled. */
	appointmentId?: string;
	/** What the words need and the rows do not say; no address, no link, nothing of health. */
	facts?: Record<string, string | number | boolean | null>;
	/** There is no address to send it to: the row says so at once, and no job tries. */
	noAddress?: boolean;
	/** A link that opens something: kept encrypted, and cleared once it was handed over. */
	secret?: string;
}

/** The part after the @ of the sender's address: message ids end in it. */
export function senderDomain(): string {
	const { mail, origin } = config();
	return /@([^>\s]+)>?\s*$/.exec(mail?.from ?? '')?.[1] ?? new URL(origin).hostname;
}

/**
 * Puts a mail and the job that sends it into the given transaction: without the change there is no mail, and without the
 * mail no change. The message id is made here, once, so that every try carries the same one.
 */
export async function queueMail(writer: Writer, mail: NewMail): Promise<string> {
	const id = newId();
	await writer
		.insertInto('mail')
		.values({
			id,
			kind: mail.kind,
			person_id: mail.personId ?? null,
			subject_id: mail.subjectId ?? null,
			study_id: mail.studyId ?? null,
			site_id: mail.siteId ?? null,
			appointment_id: mail.appointmentId ?? null,
			facts: JSON.stringify(mail.facts ?? {}),
			secret: mail.secret === undefined ? null : wrap(mail.secret),
			...(mail.noAddress ? { status: 'no address' as const } : {}),
			message_id: `<${newRandomId()}@${senderDomain()}>`
		})
		.execute();
	if (!mail.noAddress)
		// An account's own mail is waited for, often in front of the screen.
		await writer.enqueue('mail', { mailId: id }, { urgent: mail.personId !== undefined });
	return id;
}
