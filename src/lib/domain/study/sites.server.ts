import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { rolesFor, type Capability } from '$lib/server/permission';

export interface SiteHead {
	id: string;
	code: string;
	name: string;
	zone: string;
}

/** The sites of the study at which the actor's roles allow the capability. */
export async function sitesFor(
	reader: Reader,
	actor: Actor,
	studyId: string,
	capability: Capability
): Promise<SiteHead[]> {
	const allowed = rolesFor(capability);
	const mine = actor.grants.filter(
		(grant) => allowed.includes(grant.role) && (grant.studyId === null || grant.studyId === studyId)
	);
	const all = actor.system || mine.some((grant) => grant.siteId === null);
	const named = mine.flatMap((grant) => (grant.siteId === null ? [] : [grant.siteId]));
	if (!all && named.length === 0) return [];
	return reader
		.selectFrom('site')
		.select(['id', 'code', 'name', 'zone'])
		.where('study_id', '=', studyId)
		.$if(!all, (query) => query.where('id', 'in', named))
		.orderBy('code')
		.execute();
}

/** All sites of the study by name: somebody may be moved to one where the actor has no part. */
export const findAllSites = (actor: Actor, studyId: string): Promise<SiteHead[]> =>
	read(actor, 'study.enter', { studyId }, (reader) =>
		reader
			.selectFrom('site')
			.select(['id', 'code', 'name', 'zone'])
			.where('study_id', '=', studyId)
			.orderBy('code')
			.execute()
	);

export const findSitesWhere = (
	actor: Actor,
	studyId: string,
	capability: Capability
): Promise<SiteHead[]> =>
	read(actor, capability, { studyId }, (reader) => sitesFor(reader, actor, studyId, capability));
