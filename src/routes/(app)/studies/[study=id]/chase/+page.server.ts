import { windowsQuery } from '$lib/domain/visit/windows.input';
import { findWindows } from '$lib/domain/visit/windows.reads.server';
import { findSitesWhere } from '$lib/domain/study/sites.server';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const cursor = windowsQuery.shape.cursor.safeParse(url.searchParams.get('cursor') ?? '');
	return serve(async () => ({
		list: await findWindows(
			actor,
			params.study,
			windowsQuery.parse({ what: 'passed', cursor: cursor.success ? cursor.data : '', limit: 50 })
		),
		severalSites: (await findSitesWhere(actor, params.study, 'subject.read')).length > 1,
		further: cursor.success && cursor.data !== '',
		may: {
			book: may(actor.grants, 'visit.book', { studyId: params.study }),
			chase: may(actor.grants, 'visit.chase', { studyId: params.study })
		}
	}));
};
