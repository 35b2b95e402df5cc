import { sql } from 'kysely';
import type { Writer } from '$lib/server/change';
import { queueMail } from '$lib/server/mail/queue-mail';
import type { VisitFacts } from '$lib/server/mail/visit-content';

/**
 * Puts the subject's calendar mail into the change. A subject without an address gets none, and the mail's row says so:
 * the call list is made from it.
 */
export async function tellSubject(
	writer: Writer,
	kind: 'visit-invitation' | 'visit-moved' | 'visit-cancelled',
	appointmentId: string,
	before: Date | null = null
): Promise<void> {
	const row = await writer
		.selectFrom('appointment as a')
		.innerJoin('room as r', 'r.id', 'a.room_id')
		.innerJoin('site as p', 'p.id', 'a.site_id')
		.select([
			'a.study_id',
			'a.site_id',
			'a.subject_id',
			'a.calendar_uid',
			'a.calendar_sequence',
			'a.starts_at',
			'a.ends_at',
			'a.zone',
			'r.name as room',
			'p.name as site',
			sql<string>`app.actor()`.as('actor')
		])
		.where('a.id', '=', appointmentId)
		.executeTakeFirstOrThrow();
	// Nobody writes to somebody who has died.
	const died = await writer
		.selectFrom('study_exit')
		.select('id')
		.where('subject_id', '=', row.subject_id)
		.where('kind', '=', 'died')
		.where('taken_back_at', 'is', null)
		.executeTakeFirst();
	if (died) return;
	const contact = await writer
		.selectFrom('contact_details')
		.select('email')
		.where('subject_id', '=', row.subject_id)
		.executeTakeFirst();
	const facts: VisitFacts = {
		uid: row.calendar_uid,
		sequence: row.calendar_sequence,
		start: row.starts_at.toISOString(),
		end: row.ends_at.toISOString(),
		before: before?.toISOString() ?? null,
		zone: row.zone,
		place: `${row.room}, ${row.site}`,
		bookedBy: row.actor
	};
	await queueMail(writer, {
		kind,
		studyId: row.study_id,
		siteId: row.site_id,
		subjectId: row.subject_id,
		appointmentId,
		facts,
		noAddress: !contact?.email
	});
}
