import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { getPublished } from '../study/study.reads.server';
import { answeredVersionOf, answersOf, sameAnswers } from './eligibility';
import { getSite, siteOf } from './site.reads.server';
import type { EligibilityInput, ScreeningInput } from './subject.input';

/** One at a time for a site and a purpose, or two callers would take the same next number. */
export const takeTurn = (writer: Writer, what: string, siteId: string) =>
	sql`select pg_advisory_xact_lock(hashtextextended(${`${what}:${siteId}`}, 0))`.execute(writer);

/** Adds somebody who was considered to the site's screening log, under the log's next number. */
export const addScreening = (
	actor: Actor,
	studyId: string,
	input: ScreeningInput
): Promise<{ id: string; number: number; version: number }> =>
	change(actor, 'screening.edit', { studyId, siteId: input.siteId }, async (writer) => {
		const site = await getSite(writer, studyId, input.siteId);
		await getPublished(writer, studyId);
		if (input.screenedOn > site.today)
			throw new Refusal(
				'FUTURE',
				{ what: 'The day' },
				{ screenedOn: 'This day has not come yet.' }
			);
		await takeTurn(writer, 'screening', site.id);
		const last = await writer
			.selectFrom('screening')
			.select((e) => e.fn.max('number').as('number'))
			.where('study_id', '=', studyId)
			.where('site_id', '=', site.id)
			.executeTakeFirst();
		const id = newId();
		const number = (last?.number ?? 0) + 1;
		await writer
			.insertInto('screening')
			.values({ id, study_id: studyId, site_id: site.id, number, screened_on: input.screenedOn })
			.execute();
		return { id, number, version: 1 };
	});

/** The screening, held until the change is over; refused when it is closed already. */
export async function openScreening(writer: Writer, studyId: string, siteId: string, id: string) {
	const screening = await writer
		.selectFrom('screening')
		.select(['id', 'number', 'screened_on', 'outcome', 'eligibility', 'version'])
		.where('study_id', '=', studyId)
		.where('site_id', '=', siteId)
		.where('id', '=', id)
		.forUpdate()
		.executeTakeFirst();
	if (!screening) throw new Refusal('NOT_FOUND');
	if (screening.outcome === 'entered') throw new Refusal('ALREADY_ENTERED');
	if (screening.outcome === 'not entered')
		throw new Refusal('CONFLICT', {
			what: 'This screening is closed: the person was not entered. Begin a new one.'
		});
	return screening;
}

export async function answerEligibility(
	actor: Actor,
	studyId: string,
	screeningId: string,
	input: EligibilityInput,
	version: number
): Promise<{ version: number }> {
	const siteId = await siteOf(actor, 'screening.edit', 'screening', studyId, screeningId);
	return change(actor, 'screening.edit', { studyId, siteId }, async (writer) => {
		const screening = await openScreening(writer, studyId, siteId, screeningId);
		const published = await getPublished(writer, studyId);
		const known = new Set(published.definition.eligibility.map((each) => each.key));
		const strange = Object.keys(input.answers).find((key) => !known.has(key));
		if (strange)
			throw new Refusal(
				'INVALID',
				{},
				{ [`answers.${strange}`]: 'This study has no such criterion.' }
			);
		// The same answers sent once more are no new answers: who gave them and when stays, and so does a signature.
		const same =
			answeredVersionOf(screening.eligibility) === published.number &&
			sameAnswers(answersOf(screening.eligibility), input.answers);
		const changed = await writer
			.updateTable('screening')
			.set({
				eligibility: JSON.stringify(
					same
						? screening.eligibility
						: {
								answers: input.answers,
								protocolVersion: published.number,
								answeredBy: actor.personId,
								answeredAt: clock.now().toISOString()
							}
				)
			})
			.where('id', '=', screening.id)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version };
	});
}

/** Closes a screening: the person was considered and not entered, and why. */
export async function closeScreening(
	actor: Actor,
	studyId: string,
	screeningId: string,
	reason: string,
	version: number
): Promise<{ version: number }> {
	const siteId = await siteOf(actor, 'screening.edit', 'screening', studyId, screeningId);
	return change(actor, 'screening.edit', { studyId, siteId }, async (writer) => {
		const screening = await openScreening(writer, studyId, siteId, screeningId);
		const changed = await writer
			.updateTable('screening')
			.set({ outcome: 'not entered', reason })
			.where('id', '=', screening.id)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version };
	});
}
