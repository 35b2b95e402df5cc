import { findSites } from '$lib/domain/study/study.reads.server';
import { threadsQuery } from '$lib/domain/subject/subject.input';
import { findThreads, getThreadFrame } from '$lib/domain/subject/threads.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

const addressed = threadsQuery.omit({ cursor: true, limit: true });

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const asked = addressed.safeParse(Object.fromEntries(url.searchParams));
	// An address that makes no sense shows everything rather than nothing.
	const filter = asked.success ? asked.data : addressed.parse({});
	return serve(async () => {
		const [sites, frame, first] = await Promise.all([
			findSites(actor, params.study),
			getThreadFrame(actor, params.study, filter),
			findThreads(actor, params.study, { ...filter, limit: 40 })
		]);
		return {
			sites,
			frame,
			first,
			filter,
			view: url.searchParams.get('view') === 'table' ? ('table' as const) : ('threads' as const)
		};
	});
};
