import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { closeAppointment, findOpenAppointment } from '../visit/booking.commands.server';
import { endsVisits } from './exit';
import { getSite, siteOf } from './site.reads.server';
import type { ExitInput } from './subject.input';

/**
 * Records how and when a subject left, or stopped the treatment. Where visits end with it, those to come are not
 * required any more and their bookings are cancelled; what was collected stays.
 */
export async function recordExit(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: ExitInput
): Promise<{ id: string; version: number; visitsEnded: number }> {
	const siteId = await siteOf(actor, 'subject.exit', 'subject', studyId, subjectId);
	const reason = input.reason
		? `Left the study: ${input.kind}. ${input.reason}`
		: `Left the study: ${input.kind}.`;
	return change(
		actor,
		'subject.exit',
		{ studyId, siteId },
		async (writer) => {
			const site = await getSite(writer, studyId, siteId);
			// Held so that nobody is randomised meanwhile.
			const subject = await writer
				.selectFrom('subject')
				.select(['id', 'enrolled_on'])
				.where('study_id', '=', studyId)
				.where('id', '=', subjectId)
				.forUpdate()
				.executeTakeFirst();
			if (!subject) throw new Refusal('NOT_FOUND');
			if (input.happenedOn > site.today)
				throw new Refusal(
					'FUTURE',
					{ what: 'The day' },
					{ happenedOn: 'This day has not come yet.' }
				);
			if (input.happenedOn < subject.enrolled_on)
				throw new Refusal(
					'RULE',
					{ why: 'The day lies before the enrolment.' },
					{ happenedOn: 'Choose the day of the enrolment or a later one.' }
				);
			await mustFollow(writer, studyId, subjectId, input);
			const id = newId();
			await writer
				.insertInto('study_exit')
				.values({
					id,
					study_id: studyId,
					site_id: siteId,
					subject_id: subjectId,
					kind: input.kind,
					happened_on: input.happenedOn,
					reason: input.reason === '' ? null : input.reason
				})
				.execute();
			const visitsEnded = endsVisits(input.kind)
				? await endVisits(writer, studyId, subjectId, input.happenedOn)
				: 0;
			return { id, version: 1, visitsEnded };
		},
		{ reason }
	);
}

/** Refuses what cannot follow what is recorded already. */
async function mustFollow(
	writer: Writer,
	studyId: string,
	subjectId: string,
	input: ExitInput
): Promise<void> {
	const earlier = await writer
		.selectFrom('study_exit')
		.select('kind')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.execute();
	if (earlier.some((exit) => exit.kind === input.kind))
		throw new Refusal('CONFLICT', { what: `“${input.kind}” is recorded already.` });
	if (earlier.some((exit) => exit.kind === 'died' || exit.kind === 'completed'))
		throw new Refusal('LEFT_STUDY');
	if (input.kind === 'lost to follow-up') {
		const tried = await writer
			.selectFrom('contact_attempt')
			.select('id')
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.limit(1)
			.executeTakeFirst();
		if (!tried)
			throw new Refusal('RULE', {
				why: 'Somebody is lost to follow-up after attempts to reach them: log those first.'
			});
	}
	if (input.kind === 'completed') {
		const open = await writer
			.selectFrom('visit')
			.select('name')
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.where('status', 'in', ['planned', 'booked', 'under way'])
			.orderBy('position')
			.execute();
		if (open.length > 0)
			throw new Refusal('RULE', {
				why: `These visits are still open: ${open.map((visit) => visit.name).join(', ')}.`
			});
	}
}

/** Visits whose window reaches past the day are not required; those that had passed stay to be accounted for. */
async function endVisits(
	writer: Writer,
	studyId: string,
	subjectId: string,
	on: string
): Promise<number> {
	const ended = await writer
		.updateTable('visit')
		.set({ status: 'not required' })
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('status', 'in', ['planned', 'booked'])
		.where('latest', '>=', on)
		.returning('id')
		.execute();
	for (const visit of ended) {
		const booked = await findOpenAppointment(writer, visit.id);
		if (booked) await closeAppointment(writer, booked);
	}
	return ended.length;
}
