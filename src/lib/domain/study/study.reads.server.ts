import type { Actor } from '$lib/server/actor';
import { read, readOwn } from '$lib/server/change';
import { Refusal } from '$lib/refusal';

export interface StudyHead {
	id: string;
	code: string;
	name: string;
	masked: boolean;
	training: boolean;
	status: 'draft' | 'open' | 'ended';
	version: number;
}

/** The studies in which the actor has a part; an administrator as such has none. */
export const findStudies = (actor: Actor): Promise<StudyHead[]> =>
	readOwn(actor, (reader) =>
		reader
			.selectFrom('study')
			.select(['id', 'code', 'name', 'masked', 'training', 'status', 'version'])
			.orderBy('code')
			.execute()
	);

export const getStudy = (actor: Actor, studyId: string): Promise<StudyHead> =>
	read(actor, 'study.enter', { studyId }, async (reader) => {
		const found = await reader
			.selectFrom('study')
			.select(['id', 'code', 'name', 'masked', 'training', 'status', 'version'])
			.where('id', '=', studyId)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		return found;
	});

export interface SiteHead {
	id: string;
	code: string;
	name: string;
	zone: string;
}

/** The sites of the study that the actor may see. */
export const findSites = (actor: Actor, studyId: string): Promise<SiteHead[]> =>
	read(actor, 'study.enter', { studyId }, async (reader) => {
		const mine = actor.grants.filter((g) => g.studyId === null || g.studyId === studyId);
		const all = mine.some((g) => g.siteId === null);
		return reader
			.selectFrom('site')
			.select(['id', 'code', 'name', 'zone'])
			.where('study_id', '=', studyId)
			.$if(!all, (q) =>
				q.where(
					'id',
					'in',
					mine.map((g) => g.siteId as string)
				)
			)
			.orderBy('code')
			.execute();
	});
