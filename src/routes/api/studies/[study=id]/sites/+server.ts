import { z } from 'zod';
import { findSiteViews, siteView } from '$lib/domain/site/site.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'The sites you may see: approval, opening hours, closures.',
	response: z.object({ sites: z.array(siteView) }),
	handle: async ({ actor, params }) => ({
		sites: await findSiteViews(actor, params.study as string)
	})
});
