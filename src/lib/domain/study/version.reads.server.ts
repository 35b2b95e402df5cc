import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import type { StudyDefinition } from './definition';
import { readDefinition } from './template';

export interface VersionHead {
	number: number;
	status: 'draft' | 'published';
	publishedAt: Date | null;
	publishedBy: string | null;
}

/** Every version of the study's protocol, the newest first. */
export const findVersions = (actor: Actor, studyId: string): Promise<VersionHead[]> =>
	read(actor, 'study.read', { studyId }, (reader) =>
		reader
			.selectFrom('protocol_version')
			.leftJoin('person', 'person.id', 'protocol_version.published_by')
			.select(['number', 'status', 'published_at as publishedAt', 'person.name as publishedBy'])
			.where('study_id', '=', studyId)
			.orderBy('number', 'desc')
			.execute()
	);

/** The definition of a version by its number, drafts included. */
export const getVersion = (
	actor: Actor,
	studyId: string,
	number: number
): Promise<StudyDefinition> =>
	read(actor, 'study.read', { studyId }, async (reader) => {
		const found = await reader
			.selectFrom('protocol_version')
			.select('definition')
			.where('study_id', '=', studyId)
			.where('number', '=', number)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		const held = readDefinition(found.definition);
		if (!held.ok) throw new Error('A stored study definition does not hold.');
		return held.definition;
	});
