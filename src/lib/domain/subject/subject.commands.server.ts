import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal, type FieldErrors } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { armName, isRandomised } from '../study/definition';
import { tellLowStock } from '../kit/kit.commands.server';
import { holdVersion } from '../amendment/amendment.commands.server';
import { publishedVersions, newestOf } from '../amendment/versions.reads.server';
import { birthDateOf, consentsOf, groundFor, noneCounts } from '../consent/ground.server';
import { getDefinition } from '../study/study.reads.server';
import { plainDateOf } from '$lib/time/dates';
import { isSigned } from '../signature/signature.reads.server';
import { answeredVersionOf, answersOf, standing } from './eligibility';
import { mostSubjectsPerSite, subjectNumber } from './number';
import { characteristicsOf, stratumOf } from './particulars';
import { planSubjectVisits } from './plan-visits.server';
import { openScreening, takeTurn } from './screening.commands.server';
import { getSite, siteOf, type SiteNow } from './site.reads.server';
import type { ContactInput, EnrolInput } from './subject.input';

/** The site's next free subject numbers. The site's turn is held to the end of the change, so that none is given twice. */
export async function nextSubjectNumbers(
	writer: Writer,
	studyId: string,
	site: Pick<SiteNow, 'id' | 'code'>,
	count = 1
): Promise<string[]> {
	await takeTurn(writer, 'subject', site.id);
	// By the site's code, not by where the subjects are now: a number stays with who has moved away.
	const { rows } = await sql<{ last: number | null }>`
		select max(substring(number from 4 for 4)::int) as last from app.subject
		where study_id = ${studyId}::uuid
			and number ~ ${`^${site.code}-[0-9]{4}-[0-9]$`}`.execute(writer);
	const last = rows[0]?.last ?? 0;
	if (last + count > mostSubjectsPerSite)
		throw new Refusal('CONFLICT', { what: 'The site has no subject number left.' });
	return Array.from({ length: count }, (_, at) => subjectNumber(site.code, last + 1 + at));
}

/**
 * Enters a screened person into the study: with a consent on or before the day and every criterion of the version in
 * force met. Gives the subject number and plans the visits counted from enrolment.
 */
export async function enrolSubject(
	actor: Actor,
	studyId: string,
	screeningId: string,
	input: EnrolInput,
	version: number
): Promise<{ id: string; number: string; version: number }> {
	const siteId = await siteOf(actor, 'subject.enrol', 'screening', studyId, screeningId);
	return change(actor, 'subject.enrol', { studyId, siteId }, async (writer) => {
		await holdVersion(writer, studyId, false);
		const screening = await openScreening(writer, studyId, siteId, screeningId);
		if (screening.version !== version) throw new Refusal('STALE');
		const site = await getSite(writer, studyId, siteId);
		const versions = await publishedVersions(writer, studyId);
		const { id: protocolVersionId, number: protocolVersion, definition } = newestOf(versions);

		if (input.enrolledOn > site.today)
			throw new Refusal(
				'FUTURE',
				{ what: 'The day of enrolment' },
				{ enrolledOn: 'This day has not come yet.' }
			);
		if (site.approvedOn === null || input.enrolledOn < site.approvedOn)
			throw new Refusal('SITE_NOT_APPROVED', { site: site.name });
		if (input.enrolledOn < screening.screened_on)
			throw new Refusal(
				'RULE',
				{ why: 'The day of enrolment lies before the screening.' },
				{ enrolledOn: 'Choose the day of the screening or a later one.' }
			);
		const why = noneCounts(
			await consentsOf(writer, { screeningId: screening.id }, site.zone),
			groundFor(
				versions,
				protocolVersion,
				plainDateOf(input.enrolledOn),
				birthDateOf(definition, input.characteristics)
			)
		);
		if (why !== null) throw new Refusal('CONSENT_NEEDED', { why });
		const { unanswered, unmet } = standing(definition, answersOf(screening.eligibility));
		if (unanswered.length + unmet.length > 0)
			throw new Refusal('NOT_ELIGIBLE', {
				which: [...unmet, ...unanswered].map((criterion) => criterion.text).join(' ')
			});
		// The answers may be those to an older version, while the ones in force ask for more.
		if (
			definition.eligibilitySigned &&
			(answeredVersionOf(screening.eligibility) !== protocolVersion ||
				!(await isSigned(writer, 'eligibility', screening.id)))
		)
			throw new Refusal('SIGNATURE_NEEDED');
		const strata = stratumOf(definition, input.stratum, site.code);
		const known = characteristicsOf(definition, input.characteristics, site.today);
		const errors: FieldErrors = { ...strata.errors, ...known.errors };
		if (Object.keys(errors).length > 0) throw new Refusal('INVALID', {}, errors);
		if (input.contact && !may(actor.grants, 'contact.edit', { studyId, siteId }))
			throw new Refusal('NOT_PERMITTED');

		const [number = ''] = await nextSubjectNumbers(writer, studyId, site);
		const id = newId();
		await writer
			.insertInto('subject')
			.values({
				id,
				study_id: studyId,
				site_id: siteId,
				protocol_version_id: protocolVersionId,
				number,
				enrolled_on: input.enrolledOn,
				stratum: JSON.stringify(strata.stratum),
				characteristics: JSON.stringify(known.characteristics)
			})
			.execute();
		await writer
			.updateTable('screening')
			.set({ outcome: 'entered', subject_id: id })
			.where('id', '=', screening.id)
			.execute();
		await writer
			.updateTable('consent')
			.set({ subject_id: id })
			.where('screening_id', '=', screening.id)
			.execute();
		await writer
			.updateTable('upload')
			.set({ subject_id: id })
			.where('study_id', '=', studyId)
			.where('consent_id', 'in', (e) =>
				e.selectFrom('consent').select('consent.id').where('screening_id', '=', screening.id)
			)
			.execute();
		if (input.contact) await insertContact(writer, studyId, siteId, id, input.contact);
		await planSubjectVisits(writer, studyId, id);
		return { id, number, version: 1 };
	});
}

const blankIsNone = (text: string) => (text === '' ? null : text);

const insertContact = (
	writer: Writer,
	studyId: string,
	siteId: string,
	subjectId: string,
	contact: ContactInput
) =>
	writer
		.insertInto('contact_details')
		.values({
			subject_id: subjectId,
			study_id: studyId,
			site_id: siteId,
			name: contact.name,
			email: blankIsNone(contact.email),
			phone: blankIsNone(contact.phone),
			language: contact.language
		})
		.execute();

/** Keeps the subject's contact details; version 0 says that there are none yet. */
export async function saveContactDetails(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: ContactInput,
	version: number
): Promise<{ version: number }> {
	const siteId = await siteOf(actor, 'contact.edit', 'subject', studyId, subjectId);
	return change(actor, 'contact.edit', { studyId, siteId }, async (writer) => {
		if (version === 0) {
			const there = await writer
				.selectFrom('contact_details')
				.select('version')
				.where('subject_id', '=', subjectId)
				.executeTakeFirst();
			if (there) throw new Refusal('STALE');
			await insertContact(writer, studyId, siteId, subjectId, input);
			return { version: 1 };
		}
		const changed = await writer
			.updateTable('contact_details')
			.set({
				name: input.name,
				email: blankIsNone(input.email),
				phone: blankIsNone(input.phone),
				language: input.language
			})
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version };
	});
}

/** Refused when the checklist the subject came in by is not signed, or the signature is broken. */
async function mustStandSigned(writer: Writer, subjectId: string): Promise<void> {
	const screening = await writer
		.selectFrom('screening')
		.select('id')
		.where('subject_id', '=', subjectId)
		.executeTakeFirst();
	if (!screening || !(await isSigned(writer, 'eligibility', screening.id)))
		throw new Refusal('SIGNATURE_NEEDED');
}

/**
 * The subject's allocation, once: the closed side gives a kit number, and the arm only where the study masks nothing.
 * Visits counted from randomisation get their windows in the same change.
 */
export async function randomiseSubject(
	actor: Actor,
	studyId: string,
	subjectId: string
): Promise<{ kitNumber: string; arm: string | null; version: number }> {
	const siteId = await siteOf(actor, 'subject.randomise', 'subject', studyId, subjectId);
	return change(actor, 'subject.randomise', { studyId, siteId }, async (writer) => {
		const subject = await writer
			.selectFrom('subject')
			.select(['id', 'kit_number', 'protocol_version_id'])
			.where('study_id', '=', studyId)
			.where('id', '=', subjectId)
			.forUpdate()
			.executeTakeFirst();
		if (!subject) throw new Refusal('NOT_FOUND');
		if (subject.kit_number !== null) throw new Refusal('ALREADY_RANDOMISED');
		const definition = await getDefinition(writer, studyId, subject.protocol_version_id);
		if (!isRandomised(definition))
			throw new Refusal('RULE', { why: 'This study has one arm: nobody is randomised.' });
		if (definition.eligibilitySigned) await mustStandSigned(writer, subjectId);
		const exits = await writer
			.selectFrom('study_exit')
			.select('kind')
			.where('study_id', '=', studyId)
			.where('subject_id', '=', subjectId)
			.where('taken_back_at', 'is', null)
			.execute();
		if (exits.length > 0) throw new Refusal('LEFT_STUDY');
		const { rows } = await sql<{
			kit: string;
		}>`select closed.allocate(${subjectId}::uuid) as kit`.execute(writer);
		await planSubjectVisits(writer, studyId, subjectId);
		await tellLowStock(writer, studyId, siteId);
		const after = await writer
			.selectFrom('subject')
			.select(['arm_key', 'version'])
			.where('id', '=', subjectId)
			.executeTakeFirstOrThrow();
		return {
			kitNumber: rows[0]?.kit ?? '',
			arm: armName(definition, after.arm_key),
			version: after.version
		};
	});
}
