import { filterFrom } from '$lib/domain/audit/audit.input';
import { listEvents } from '$lib/domain/audit/audit.reads.server';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const filter = filterFrom(url.searchParams);
	return {
		studyId: params.study,
		filter,
		first: await serve(() => listEvents(actor, params.study, filter, { limit: 50 })),
		mayExport: may(actor.grants, 'audit.export', { studyId: params.study })
	};
};
