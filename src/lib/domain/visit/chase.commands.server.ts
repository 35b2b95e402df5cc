import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { windowText } from '../schedule/window';
import { closeOpenAppointment } from './booking.commands.server';
import { addDeviation } from './conduct.commands.server';
import { refuseStale, refuseStep } from './steps.server';
import type { DeclareMissedInput, LogContactInput } from './visit.input';
import { holdVisit, scopeOfVisit } from './visit.reads.server';

/** Clocks that differ a little are no lie. */
const toleranceMs = 2 * 60_000;

/** When something was observed or done, as told; now when nothing was told. Never later than now. */
export function momentOf(told: string | undefined, field: string): Date {
	const now = clock.now();
	if (told === undefined) return now;
	const at = new Date(told);
	if (Number.isNaN(at.getTime()) || at.getUTCFullYear() < 1900)
		throw new Refusal('INVALID', {}, { [field]: 'Give a date and a time.' });
	if (at.getTime() > now.getTime() + toleranceMs) {
		const facts = { what: 'This time' };
		throw new Refusal('FUTURE', facts, { [field]: new Refusal('FUTURE', facts).message });
	}
	return at;
}

/** Writes down an attempt to reach the subject about a visit. */
export async function logContact(
	actor: Actor,
	studyId: string,
	visitId: string,
	input: LogContactInput
): Promise<{ id: string; version: number }> {
	const scope = await scopeOfVisit(actor, 'visit.chase', studyId, visitId);
	return change(actor, 'visit.chase', scope, async (writer) => {
		const visit = await holdVisit(writer, studyId, visitId);
		const at = momentOf(input.at, 'at');
		if (input.tryAgainOn !== '' && input.tryAgainOn < visit.today) {
			const sentence = 'This day has passed.';
			throw new Refusal('RULE', { why: sentence }, { tryAgainOn: sentence });
		}
		const id = newId();
		const made = await writer
			.insertInto('contact_attempt')
			.values({
				id,
				study_id: studyId,
				site_id: visit.site.id,
				subject_id: visit.subjectId,
				visit_id: visitId,
				at,
				way: input.way,
				outcome: input.outcome,
				next_step: input.nextStep || null,
				try_again_on: input.tryAgainOn || null,
				by: actor.personId
			})
			.returning('version')
			.executeTakeFirstOrThrow();
		return { id, version: made.version };
	});
}

/** Gives a visit up once its window has passed; leaves one deviation. `version` is the visit's. */
export async function declareMissed(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number,
	input: DeclareMissedInput
): Promise<{ version: number }> {
	const scope = await scopeOfVisit(actor, 'visit.chase', studyId, visitId);
	return change(
		actor,
		'visit.chase',
		scope,
		async (writer) => {
			const visit = await holdVisit(writer, studyId, visitId);
			refuseStep(visit, 'missed', input.reason);
			refuseStale(visit, version);
			if (visit.window === null)
				throw new Refusal('RULE', {
					why: 'This visit has no window yet, so it cannot have been missed.'
				});
			await closeOpenAppointment(writer, visitId);
			const changed = await writer
				.updateTable('visit')
				.set({ status: 'missed', missed_reason: input.reason })
				.where('id', '=', visitId)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(changed);
			await addDeviation(
				writer,
				visit,
				'missed visit',
				`${visit.name} did not take place in its window (${windowText(visit.window)}). Reason: ${input.reason}`
			);
			return { version: changed[0]?.version ?? version + 1 };
		},
		{ reason: input.reason }
	);
}
