import { approveSite } from '../../src/lib/domain/site/site.commands.server';
import { findSiteViews } from '../../src/lib/domain/site/site.reads.server';
import type { Actor } from '../../src/lib/server/actor';

/** Records the approval of every site of the study, long before anybody is enrolled there. */
export async function approveSites(manager: Actor, studyId: string, on = '2020-01-01') {
	for (const site of await findSiteViews(manager, studyId))
		await approveSite(manager, studyId, site.id, { approvedOn: on }, site.version);
}
