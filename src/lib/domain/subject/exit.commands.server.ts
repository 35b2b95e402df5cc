import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { dateInZone } from '$lib/time/zones';
import { closeAppointment, findOpenAppointment } from '../visit/booking.commands.server';
import { endsVisits, stopsMail } from './exit';
import { mustFollow } from './exit-rules.server';
import { planSubjectVisits } from './plan-visits.server';
import { getSite, siteOf } from './site.reads.server';
import type { ExitInput, TakeBackInput } from './subject.input';

export interface RecordedExit {
	id: string;
	version: number;
	visitsEnded: number;
	bookingsCancelled: number;
}

/**
 * Records how and when a subject left, or stopped the treatment. Where visits end with it, those to come are not
 * required any more and their bookings are cancelled; what was collected stays.
 */
export async function recordExit(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: ExitInput
): Promise<RecordedExit> {
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
			// Held so that nobody is randomised, moved or let out another way meanwhile.
			const subject = await holdSubject(writer, studyId, siteId, subjectId);
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
			await mustFollow(writer, studyId, subject, input);
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
			if (stopsMail(input.kind)) await stopMails(writer, studyId, subjectId);
			const ended = endsVisits(input.kind)
				? await endVisits(writer, studyId, subjectId, id, input.happenedOn)
				: { visitsEnded: 0, bookingsCancelled: 0 };
			return { id, version: 1, ...ended };
		},
		{ reason }
	);
}

/** The subject, held until the change is over; not found where it has moved to another site meanwhile. */
async function holdSubject(writer: Writer, studyId: string, siteId: string, subjectId: string) {
	const subject = await writer
		.selectFrom('subject')
		.select(['id', 'enrolled_on', 'protocol_version_id'])
		.where('study_id', '=', studyId)
		.where('site_id', '=', siteId)
		.where('id', '=', subjectId)
		.forUpdate()
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	return subject;
}

/** Visits whose window reaches past the day are not required; those that had passed stay to be accounted for. */
async function endVisits(
	writer: Writer,
	studyId: string,
	subjectId: string,
	exitId: string,
	on: string
): Promise<{ visitsEnded: number; bookingsCancelled: number }> {
	const ended = await writer
		.updateTable('visit')
		.set({ status: 'not required', ended_by: exitId })
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('status', 'in', ['planned', 'booked'])
		.where((e) => e.or([e('latest', 'is', null), e('latest', '>=', on)]))
		.returning('id')
		.execute();
	let bookingsCancelled = 0;
	for (const visit of ended) {
		const booked = await findOpenAppointment(writer, visit.id);
		if (!booked) continue;
		await closeAppointment(writer, booked);
		bookingsCancelled += 1;
	}
	return { visitsEnded: ended.length, bookingsCancelled };
}

/** Mails that wait are not sent any more. One that is being handed over at this moment cannot be called back. */
async function stopMails(writer: Writer, studyId: string, subjectId: string): Promise<void> {
	await writer
		.updateTable('mail')
		.set({ status: 'stopped', secret: null })
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('status', '=', 'waiting')
		.execute();
}

/**
 * Takes a way out back: it was entered by mistake, or the subject changed his mind. The entry stays, marked with who, when
 * and why. Visits that ended with it are to come again; what was cancelled is not booked again by itself.
 */
export async function takeBackExit(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: TakeBackInput
): Promise<{ id: string; version: number; visitsToCome: number }> {
	const siteId = await siteOf(actor, 'subject.exit', 'subject', studyId, subjectId);
	return change(
		actor,
		'subject.exit',
		{ studyId, siteId },
		async (writer) => {
			await holdSubject(writer, studyId, siteId, subjectId);
			const site = await getSite(writer, studyId, siteId);
			const exit = await writer
				.selectFrom('study_exit')
				.select(['id', 'kind', 'happened_on', 'taken_back_at', 'version'])
				.where('study_id', '=', studyId)
				.where('subject_id', '=', subjectId)
				.where('id', '=', input.exitId)
				.executeTakeFirst();
			if (!exit) throw new Refusal('NOT_FOUND');
			if (exit.taken_back_at) throw new Refusal('CONFLICT', { what: 'It was taken back already.' });
			if (input.because === 'changed mind') await mayReturn(writer, subjectId, exit, site.zone);
			const changed = await writer
				.updateTable('study_exit')
				.set({
					taken_back_at: clock.now(),
					taken_back_by: actor.personId,
					taken_back_reason: input.reason
				})
				.where('id', '=', exit.id)
				.where('version', '=', exit.version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			const visitsToCome = await bringBack(writer, studyId, subjectId, exit.id);
			return { id: exit.id, version: changed[0]?.version ?? 0, visitsToCome };
		},
		{ reason: `Taken back (${input.because}): ${input.reason}` }
	);
}

/** Somebody who returns consented again; from death and completion nobody returns. */
async function mayReturn(
	writer: Writer,
	subjectId: string,
	exit: { id: string; kind: string; happened_on: string },
	zone: string
): Promise<void> {
	if (exit.kind === 'died' || exit.kind === 'completed')
		throw new Refusal(
			'RULE',
			{ why: `“${exit.kind}” is taken back only where it was entered by mistake.` },
			{ because: 'Choose “entered by mistake”, if it was.' }
		);
	if (exit.kind !== 'consent withdrawn') return;
	const consents = await writer
		.selectFrom('consent')
		.select('signed_at')
		.where('subject_id', '=', subjectId)
		.where('withdrawn_on', 'is', null)
		// Ids follow the order in which things were recorded: it came after the withdrawal.
		.where('id', '>', exit.id)
		.execute();
	if (!consents.some((consent) => dateInZone(consent.signed_at, zone) >= exit.happened_on))
		throw new Refusal('CONSENT_NEEDED', {
			why: 'Whoever withdrew and wants to go on consents anew: record the new consent first.'
		});
}

/** Visits that ended with it are to come again, unless another way out still ends them. */
async function bringBack(
	writer: Writer,
	studyId: string,
	subjectId: string,
	exitId: string
): Promise<number> {
	const others = await writer
		.selectFrom('study_exit')
		.select(['id', 'kind'])
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('taken_back_at', 'is', null)
		.orderBy('happened_on')
		.execute();
	const other = others.find((exit) => endsVisits(exit.kind));
	const mine = writer
		.updateTable('visit')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('status', '=', 'not required')
		.where('ended_by', '=', exitId);
	if (other) {
		await mine.set({ ended_by: other.id }).execute();
		return 0;
	}
	const back = await mine.set({ status: 'planned', ended_by: null }).returning('id').execute();
	await planSubjectVisits(writer, studyId, subjectId);
	return back.length;
}
