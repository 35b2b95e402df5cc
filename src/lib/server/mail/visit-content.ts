import { z } from 'zod';
import { invitation, mailPart, type Method } from '$lib/domain/calendar/calendar';
import { clock } from '$lib/time/clock';
import { instantText } from '$lib/time/zones';
import { config } from '../config';
import type { MailKind } from '../db/tables';
import type { ContentMaker } from './content';
import { senderDomain } from './queue-mail';
import { renderMail } from './render';

/**
 * What a calendar mail says, as it stood when the booking changed: two moves in a row are two mails, each with its own
 * sequence number and times.
 */
export const visitFacts = z.object({
	uid: z.uuid(),
	sequence: z.number().int().min(0),
	start: z.iso.datetime(),
	end: z.iso.datetime(),
	/** The start before a move. */
	before: z.iso.datetime().nullable(),
	zone: z.string(),
	place: z.string(),
	/** Whoever booked answers questions. */
	bookedBy: z.uuid()
});
export type VisitFacts = z.input<typeof visitFacts>;

function organiser(): { name: string; email: string } {
	const from = config().mail?.from ?? '';
	const email = /<([^<>\s]+)>\s*$/.exec(from)?.[1] ?? from.trim();
	const name = /^\s*"?([^"<]*?)"?\s*</.exec(from)?.[1] ?? '';
	return { name: name || 'Visits', email: email || `visits@${senderDomain()}` };
}

const toSubject =
	(
		method: Method,
		template: 'visit-invitation' | 'visit-moved' | 'visit-cancelled'
	): ContentMaker =>
	async (mail, reader) => {
		const details = await reader
			.selectFrom('contact_details')
			.select('email')
			.where('subject_id', '=', mail.subject_id)
			.executeTakeFirst();
		if (!details?.email) return null;
		const facts = visitFacts.parse(mail.facts);
		const booker = await reader
			.selectFrom('person')
			.select('email')
			.where('id', '=', facts.bookedBy)
			.executeTakeFirst();
		const [start, end] = [new Date(facts.start), new Date(facts.end)];
		const file = invitation({
			uid: facts.uid,
			sequence: facts.sequence,
			method,
			start,
			end,
			now: clock.now(),
			place: facts.place,
			organiser: organiser(),
			attendee: { email: details.email }
		});
		if (!file.ok) {
			if (file.problem.code === 'CALENDAR_ADDRESS') return null;
			throw new Error(file.problem.message);
		}
		const when = {
			when: instantText(start, facts.zone),
			place: facts.place,
			contact: booker?.email ?? organiser().email
		};
		const minutes = Math.round((end.getTime() - start.getTime()) / 60_000);
		const words =
			template === 'visit-cancelled'
				? renderMail(template, when)
				: template === 'visit-moved'
					? renderMail(template, {
							...when,
							minutes,
							before: instantText(new Date(facts.before ?? facts.start), facts.zone)
						})
					: renderMail(template, { ...when, minutes });
		const part = mailPart(file.value);
		return { to: details.email, ...words, ...(part ? { icalEvent: part } : {}) };
	};

export const visitContent = {
	'visit-invitation': toSubject('REQUEST', 'visit-invitation'),
	'visit-moved': toSubject('REQUEST', 'visit-moved'),
	'visit-cancelled': toSubject('CANCEL', 'visit-cancelled')
} satisfies Partial<Record<MailKind, ContentMaker>>;
