import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { beginRun } from '$lib/server/jobs/run';
import { clock } from '$lib/time/clock';
import { addDays } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import type { StudyDefinition } from '../study/definition';
import { askedAgainBy, checkAmendment, groundChanged, reconsentWithinDays } from './amendment';
import type { AmendmentInput, PublishAmendmentInput } from './amendment.input';
import { followVersion } from './follow.server';
import { newestOf, publishedVersions, type PublishedVersion } from './versions.reads.server';

/** A new draft from the newest published version, to be edited and published as the next one. */
export const createAmendment = (
	actor: Actor,
	studyId: string,
	input: AmendmentInput
): Promise<{ protocolVersionId: string; number: number; version: number }> =>
	change(actor, 'study.edit', { studyId }, async (writer) => {
		// Two who begin at once: the second waits, and finds the draft of the first.
		const study = await writer
			.selectFrom('study')
			.select('id')
			.where('id', '=', studyId)
			.forUpdate()
			.executeTakeFirst();
		if (!study) throw new Refusal('NOT_FOUND');
		const newest = newestOf(await publishedVersions(writer, studyId));
		const draft = await writer
			.selectFrom('protocol_version')
			.select('number')
			.where('study_id', '=', studyId)
			.where('status', '=', 'draft')
			.executeTakeFirst();
		if (draft)
			throw new Refusal('CONFLICT', {
				what: `Version ${draft.number} is being drafted already. Publish it, or work on it.`
			});
		const id = newId();
		const made = await writer
			.insertInto('protocol_version')
			.values({
				id,
				study_id: studyId,
				number: newest.number + 1,
				definition: JSON.stringify(newest.definition),
				summary: input.summary
			})
			.returning('version')
			.executeTakeFirstOrThrow();
		return { protocolVersionId: id, number: newest.number + 1, version: made.version };
	});

/** Held shared by whoever enrols and alone by whoever publishes: nobody comes in by a version that is being replaced. */
export const holdVersion = (writer: Writer, studyId: string, alone: boolean) =>
	sql`select ${sql.raw(alone ? 'pg_advisory_xact_lock' : 'pg_advisory_xact_lock_shared')}(hashtextextended(${`version:${studyId}`}, 0))`.execute(
		writer
	);

/** What the version's row says besides its definition, once the amendment's answers hold. */
export async function amendmentColumns(
	writer: Writer,
	studyId: string,
	draft: { definition: StudyDefinition; summary: string | null },
	input: PublishAmendmentInput
) {
	const previous = newestOf(await publishedVersions(writer, studyId));
	const ground = groundChanged(previous.definition, draft.definition);
	if (ground) throw new Refusal('DEFINITION', { why: ground });
	// The study office's day: no site's is meant.
	const today = dateInZone(clock.now(), 'UTC');
	const checked = checkAmendment(previous.definition, draft.definition, input, {
		today,
		previousApproval: previous.approvedOn
	});
	if (!checked.ok) throw new Refusal('INVALID', {}, checked.errors as Record<string, string>);
	return {
		summary: draft.summary ?? 'No summary was given.',
		approved_on: input.approvedOn,
		reconsent: checked.reconsent,
		reconsent_by: checked.reconsent
			? input.reconsentBy || addDays(today, reconsentWithinDays)
			: null
	};
}

/** Refuses a version that would move a site to another time zone: what is booked there would move with it. */
export async function keepZones(
	writer: Writer,
	studyId: string,
	definition: StudyDefinition
): Promise<void> {
	const sites = await writer
		.selectFrom('site')
		.select(['code', 'zone'])
		.where('study_id', '=', studyId)
		.execute();
	for (const site of definition.sites) {
		const there = sites.find((each) => each.code === site.code);
		if (there && there.zone !== site.zone)
			throw new Refusal('DEFINITION', {
				why: `Site ${site.code} is in ${there.zone}: its time zone cannot change, or what was booked would move.`
			});
	}
}

/** Subjects who are in the study on an older version and may follow the newest without being asked again. */
export async function whoFollows(
	writer: Pick<Writer, 'selectFrom'>,
	studyId: string,
	versions: readonly PublishedVersion[]
): Promise<string[]> {
	const newest = versions.at(-1);
	if (!newest) return [];
	const from = versions
		.filter(
			(version) =>
				version.number < newest.number &&
				askedAgainBy(versions, version.number, newest.number) === null
		)
		.map((version) => version.id);
	if (from.length === 0) return [];
	const rows = await writer
		.selectFrom('subject as s')
		.select('s.id')
		.where('s.study_id', '=', studyId)
		.where('s.protocol_version_id', 'in', from)
		.where((e) =>
			e.not(
				e.exists(
					e
						.selectFrom('study_exit as x')
						.select('x.id')
						.whereRef('x.subject_id', '=', 's.id')
						.where('x.kind', '<>', 'intervention discontinued')
						.where('x.taken_back_at', 'is', null)
				)
			)
		)
		.orderBy('s.id')
		.execute();
	return rows.map((row) => row.id);
}

/** Up to so many follow with the publication itself; more are a job that somebody can watch. */
const atOnce = 20;

/** After publication: whoever need not be asked again follows the new version. */
export async function letFollow(
	writer: Writer,
	actor: Actor,
	studyId: string
): Promise<{ followed: number; jobRunId: string | null }> {
	const versions = await publishedVersions(writer, studyId);
	const newest = newestOf(versions);
	const who = await whoFollows(writer, studyId, versions);
	if (who.length > atOnce) {
		const jobRunId = await beginRun(writer, actor, {
			queue: 'amendment',
			title: `${who.length} subjects follow protocol version ${newest.number}`,
			studyId
		});
		await writer.enqueue('amendment', { studyId, jobRunId });
		return { followed: 0, jobRunId };
	}
	for (const id of who) await followVersion(writer, studyId, id, newest.id);
	return { followed: who.length, jobRunId: null };
}

/** For whoever a broken-off job left behind. */
export const letFollowNow = (
	actor: Actor,
	studyId: string
): Promise<{ followed: number; jobRunId: string | null }> =>
	change(
		actor,
		'study.publish',
		{ studyId },
		async (writer) => {
			await holdVersion(writer, studyId, true);
			return letFollow(writer, actor, studyId);
		},
		{ reason: 'Follows the newest protocol version: nobody is asked again.' }
	);
