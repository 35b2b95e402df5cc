import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { studyDefinition } from '../study/definition';
import { newForms } from './amendment';
import { newestOf, publishedVersions } from './versions.reads.server';

export interface Amends {
	summary: string;
	/** Whether it brings a new consent form. */
	forms: boolean;
	/** How many people are in the study now. */
	inStudy: number;
}

/** The amendment that is being drafted, for who is about to publish it; null where there is none. */
export const findAmends = (actor: Actor, studyId: string): Promise<Amends | null> =>
	read(actor, 'study.read', { studyId }, async (reader) => {
		const draft = await reader
			.selectFrom('protocol_version')
			.select(['summary', 'definition'])
			.where('study_id', '=', studyId)
			.where('status', '=', 'draft')
			.where('number', '>', 1)
			.executeTakeFirst();
		if (!draft) return null;
		const before = newestOf(await publishedVersions(reader, studyId));
		const after = studyDefinition.parse(draft.definition);
		const { rows } = await sql<{ n: number }>`
			select count(*)::int as n from app.subject s where s.study_id = ${studyId}::uuid and not exists (
				select from app.study_exit x where x.subject_id = s.id and x.taken_back_at is null and x.kind <> 'intervention discontinued')`.execute(
			reader
		);
		return {
			summary: draft.summary ?? '',
			forms: newForms(before.definition.consentVersions, after.consentVersions).length > 0,
			inStudy: rows[0]?.n ?? 0
		};
	});
