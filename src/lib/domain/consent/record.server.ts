import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { plainDateOf, shortDateText } from '$lib/time/dates';
import { instantFromLocal } from '$lib/time/zones';
import { findPublished } from '../study/study.reads.server';
import type { SiteNow } from '../subject/site.reads.server';
import type { ConsentInput } from './consent.input';

/** Roles that may explain a study to somebody; whoever did must have held one at the site on that day. */
const explaining = ['coordinator', 'investigator', 'nurse'] as const;

interface Whose {
	studyId: string;
	site: SiteNow;
	screeningId: string | null;
	subjectId: string | null;
}

/** Keeps a consent in all its parts, each checked: a version approved by then, nothing before it is signed. */
export async function insertConsent(
	writer: Writer,
	whose: Whose,
	input: ConsentInput
): Promise<{ id: string; form: { label: string; language: string } }> {
	const { studyId, site } = whose;
	const form = await writer
		.selectFrom('consent_version')
		.select(['id', 'label', 'language', 'approved_on'])
		.where('study_id', '=', studyId)
		.where('id', '=', input.consentVersionId)
		.executeTakeFirst();
	if (!form)
		throw new Refusal('INVALID', {}, { consentVersionId: 'Choose one of this study’s versions.' });
	const at = (day: string, time: string) => instantFromLocal(plainDateOf(day), time, site.zone);
	const signedAt = at(input.signedOn, input.signedTime);
	const obtainedAt = at(input.obtainedOn, input.obtainedTime);
	const now = clock.now();
	if (signedAt > now)
		throw new Refusal(
			'FUTURE',
			{ what: 'The consent' },
			{ signedOn: 'A consent is recorded once it is signed.' }
		);
	if (obtainedAt > now)
		throw new Refusal(
			'FUTURE',
			{ what: 'The explaining person’s signature' },
			{ obtainedOn: 'A consent is recorded once both have signed.' }
		);
	for (const field of ['signedOn', 'obtainedOn'] as const)
		if (input[field] < form.approved_on)
			throw new Refusal(
				'CONSENT_EARLY',
				{ approved: shortDateText(plainDateOf(form.approved_on)) },
				{ [field]: 'This version was not approved yet.' }
			);
	const published = await findPublished(writer, studyId);
	if (input.minor && !published?.definition.minors)
		throw new Refusal(
			'RULE',
			{ why: 'This study takes no minors.' },
			{ minor: 'By its protocol this study takes no minors.' }
		);
	await mustExplain(writer, studyId, site.id, input.explainedBy, input.signedOn);
	const id = newId();
	await writer
		.insertInto('consent')
		.values({
			id,
			study_id: studyId,
			site_id: site.id,
			screening_id: whose.screeningId,
			subject_id: whose.subjectId,
			consent_version_id: form.id,
			signed_at: signedAt,
			signed_by: input.signedBy,
			explained_by: input.explainedBy,
			obtained_at: obtainedAt,
			relationship: input.relationship || null,
			witnessed: input.witnessed,
			minor: input.minor,
			assent: input.assent || null,
			assent_reason: input.assentReason || null,
			copy_given: input.copyGiven
		})
		.execute();
	return { id, form: { label: form.label, language: form.language } };
}

async function mustExplain(
	writer: Writer,
	studyId: string,
	siteId: string,
	personId: string,
	on: string
): Promise<void> {
	const held = await writer
		.selectFrom('person_role')
		.select('id')
		.where('person_id', '=', personId)
		.where('study_id', '=', studyId)
		.where('role', 'in', explaining)
		.where((e) => e.or([e('site_id', 'is', null), e('site_id', '=', siteId)]))
		.where('valid_from', '<=', on)
		.where((e) => e.or([e('valid_to', 'is', null), e('valid_to', '>=', on)]))
		.executeTakeFirst();
	if (!held)
		throw new Refusal(
			'INVALID',
			{},
			{ explainedBy: 'This person had no role at the site on that day.' }
		);
}
