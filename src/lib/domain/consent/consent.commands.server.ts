import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { holdVersion } from '../amendment/amendment.commands.server';
import { followVersion, type Followed } from '../amendment/follow.server';
import { newestOf, publishedVersions } from '../amendment/versions.reads.server';
import { openScreening } from '../subject/screening.commands.server';
import { getSite, siteOf, type SiteNow } from '../subject/site.reads.server';
import type { ConsentInput, RefuseReconsentInput, WithdrawConsentInput } from './consent.input';
import { birthDateOf, consentsOf, groundFor } from './ground.server';
import { whyNot } from './consent';
import { insertConsent } from './record.server';

/** Records a consent of somebody in screening, in all its parts. */
export async function recordConsent(
	actor: Actor,
	studyId: string,
	screeningId: string,
	input: ConsentInput
): Promise<{ id: string; version: number }> {
	const siteId = await siteOf(actor, 'consent.record', 'screening', studyId, screeningId);
	return change(actor, 'consent.record', { studyId, siteId }, async (writer) => {
		const screening = await openScreening(writer, studyId, siteId, screeningId);
		const site = await getSite(writer, studyId, siteId);
		const { id } = await insertConsent(
			writer,
			{ studyId, site, screeningId: screening.id, subjectId: null },
			input
		);
		return { id, version: 1 };
	});
}

const notBetween = (site: SiteNow, day: string, from: string, field: string): void => {
	if (day > site.today)
		throw new Refusal('FUTURE', { what: 'The day' }, { [field]: 'This day has not come yet.' });
	if (day < from)
		throw new Refusal(
			'RULE',
			{ why: 'The day lies too early.' },
			{ [field]: 'This was before there was a consent.' }
		);
};

/** A consent that is withdrawn before the person was entered: it stays in the record and does not count any more. */
export async function withdrawConsent(
	actor: Actor,
	studyId: string,
	screeningId: string,
	input: WithdrawConsentInput
): Promise<{ version: number }> {
	const siteId = await siteOf(actor, 'consent.record', 'screening', studyId, screeningId);
	return change(
		actor,
		'consent.record',
		{ studyId, siteId },
		async (writer) => {
			await openScreening(writer, studyId, siteId, screeningId);
			const site = await getSite(writer, studyId, siteId);
			const consent = (await consentsOf(writer, { screeningId }, site.zone)).find(
				(each) => each.id === input.consentId
			);
			if (!consent) throw new Refusal('NOT_FOUND');
			if (consent.withdrawnOn !== null)
				throw new Refusal('CONFLICT', { what: 'This consent was withdrawn already.' });
			notBetween(site, input.withdrawnOn, consent.signedOn, 'withdrawnOn');
			const changed = await writer
				.updateTable('consent')
				.set({ withdrawn_on: input.withdrawnOn, withdrawn_reason: input.reason || null })
				.where('id', '=', consent.id)
				.returning('version')
				.executeTakeFirstOrThrow();
			return { version: changed.version };
		},
		{ reason: 'Consent withdrawn before enrolment.' }
	);
}

async function inStudy(writer: Writer, studyId: string, subjectId: string, gone: string[]) {
	const subject = await writer
		.selectFrom('subject')
		.select(['id', 'protocol_version_id', 'enrolled_on', 'characteristics'])
		.where('study_id', '=', studyId)
		.where('id', '=', subjectId)
		.forUpdate()
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	const exits = await writer
		.selectFrom('study_exit')
		.select('kind')
		.where('subject_id', '=', subjectId)
		.where('taken_back_at', 'is', null)
		.execute();
	if (exits.some((exit) => gone.includes(exit.kind))) throw new Refusal('LEFT_STUDY');
	return { ...subject, left: exits.some((exit) => exit.kind !== 'intervention discontinued') };
}

/**
 * Records that a subject was asked again and consented: to an amendment, or for the first time alone after coming of age.
 * Whoever consents follows the newest version from then on.
 */
export async function recordReconsent(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: ConsentInput
): Promise<{ id: string; version: number; follows: number; visits: Followed }> {
	const siteId = await siteOf(actor, 'consent.record', 'subject', studyId, subjectId);
	return change(
		actor,
		'consent.record',
		{ studyId, siteId },
		async (writer) => {
			await holdVersion(writer, studyId, false);
			// Somebody who withdrew may change his mind: the new consent stands before the withdrawal is taken back.
			const subject = await inStudy(writer, studyId, subjectId, ['died', 'completed']);
			const site = await getSite(writer, studyId, siteId);
			const { id } = await insertConsent(
				writer,
				{ studyId, site, screeningId: null, subjectId },
				input
			);
			const versions = await publishedVersions(writer, studyId);
			const newest = newestOf(versions);
			const made = (await consentsOf(writer, { subjectId }, site.zone)).find(
				(each) => each.id === id
			);
			const why =
				made &&
				whyNot(
					made,
					groundFor(
						versions,
						newest.number,
						site.today,
						birthDateOf(newest.definition, subject.characteristics)
					)
				);
			if (why)
				throw new Refusal(
					'RULE',
					{ why: `This consent does not count for protocol version ${newest.number}: ${why}.` },
					why.includes('form') ? { consentVersionId: 'Use the form of the version in force.' } : {}
				);
			const visits = subject.left
				? { moved: 0, made: 0, dropped: 0 }
				: await followVersion(writer, studyId, subjectId, newest.id);
			return { id, version: 1, follows: newest.number, visits };
		},
		{ reason: 'Asked again; consented.' }
	);
}

/** Records that a subject was asked again and said no: the version that was consented to before stays. */
export async function refuseReconsent(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: RefuseReconsentInput
): Promise<{ id: string; version: number }> {
	const siteId = await siteOf(actor, 'consent.record', 'subject', studyId, subjectId);
	return change(
		actor,
		'consent.record',
		{ studyId, siteId },
		async (writer) => {
			const subject = await inStudy(writer, studyId, subjectId, ['died', 'completed']);
			const site = await getSite(writer, studyId, siteId);
			notBetween(site, input.refusedOn, subject.enrolled_on, 'refusedOn');
			const newest = newestOf(await publishedVersions(writer, studyId));
			const versionId = input.cause === 'amendment' ? newest.id : null;
			if (versionId !== null && subject.protocol_version_id === versionId)
				throw new Refusal('CONFLICT', {
					what: `The subject follows protocol version ${newest.number} already.`
				});
			const there = await writer
				.selectFrom('reconsent_refusal')
				.select('id')
				.where('subject_id', '=', subjectId)
				.where('protocol_version_id', versionId === null ? 'is' : '=', versionId)
				.executeTakeFirst();
			if (there) throw new Refusal('CONFLICT', { what: 'The refusal is recorded already.' });
			const id = newId();
			await writer
				.insertInto('reconsent_refusal')
				.values({
					id,
					study_id: studyId,
					site_id: siteId,
					subject_id: subjectId,
					protocol_version_id: versionId,
					refused_on: input.refusedOn,
					reason: input.reason || null,
					recorded_by: actor.personId
				})
				.execute();
			return { id, version: 1 };
		},
		{ reason: 'Asked again; refused.' }
	);
}
