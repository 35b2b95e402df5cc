import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change } from '$lib/server/change';
import { closeAppointment, findOpenAppointment } from '../visit/booking.commands.server';
import { getSite, siteOf } from './site.reads.server';
import type { TransferInput } from './subject.input';

/**
 * Moves a subject to another site of the study. The number, the stratum, the allocation and everything collected stay;
 * contact details and visits to come go along, their bookings here are cancelled. What this site collected stays in its
 * hand: it goes on reading and, with a reason, correcting it; the new site reads all of it.
 */
export async function transferSubject(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: TransferInput
): Promise<{ id: string; version: number; visitsMoved: number; bookingsCancelled: number }> {
	const siteId = await siteOf(actor, 'subject.transfer', 'subject', studyId, subjectId);
	return change(
		actor,
		'subject.transfer',
		{ studyId, siteId },
		async (writer) => {
			const subject = await writer
				.selectFrom('subject')
				.select(['id', 'enrolled_on'])
				.where('study_id', '=', studyId)
				.where('site_id', '=', siteId)
				.where('id', '=', subjectId)
				.forUpdate()
				.executeTakeFirst();
			// Somebody else moved the subject first.
			if (!subject) throw new Refusal('STALE');
			const here = await getSite(writer, studyId, siteId);
			const there = await writer
				.selectFrom('site')
				.select(['id', 'name'])
				.where('study_id', '=', studyId)
				.where('id', '=', input.siteId)
				.executeTakeFirst();
			if (!there || there.id === siteId)
				throw new Refusal('INVALID', {}, { siteId: 'Choose another site of this study.' });
			if (input.transferredOn > here.today)
				throw new Refusal(
					'FUTURE',
					{ what: 'The day' },
					{ transferredOn: 'This day has not come yet.' }
				);
			if (input.transferredOn < subject.enrolled_on)
				throw new Refusal(
					'RULE',
					{ why: 'The day lies before the enrolment.' },
					{ transferredOn: 'Choose the day of the enrolment or a later one.' }
				);
			const visits = await writer
				.selectFrom('visit')
				.select(['id', 'name', 'status', 'latest'])
				.where('study_id', '=', studyId)
				.where('subject_id', '=', subjectId)
				.where('status', 'in', ['booked', 'under way'])
				.orderBy('position')
				.execute();
			const begun = visits.find((visit) => visit.status === 'under way');
			if (begun)
				throw new Refusal('CONFLICT', {
					what: `${begun.name} is under way: finish it first, then move the subject.`
				});
			let bookingsCancelled = 0;
			for (const visit of visits) {
				const open = await findOpenAppointment(writer, visit.id);
				if (!open) continue;
				await closeAppointment(writer, open);
				await writer
					.updateTable('visit')
					.set({ status: 'planned' })
					.where('id', '=', visit.id)
					.execute();
				bookingsCancelled += 1;
			}
			const id = newId();
			const { rows } = await sql<{ moved: number }>`
				select app.transfer_subject(${id}::uuid, ${subjectId}::uuid, ${there.id}::uuid, ${input.transferredOn}::date, ${input.reason}) as moved`.execute(
				writer
			);
			return { id, version: 1, visitsMoved: rows[0]?.moved ?? 0, bookingsCancelled };
		},
		{ reason: input.reason }
	);
}
