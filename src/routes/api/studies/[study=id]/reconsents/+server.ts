import { z } from 'zod';
import { reconsentsQuery } from '$lib/domain/consent/consent.input';
import { findReconsents } from '$lib/domain/consent/reconsent.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Who must be asked again, and because of what; overdue first, those who refused last.',
	query: reconsentsQuery,
	response: z.object({
		items: z.array(
			z.object({
				subjectId: z.uuid(),
				number: z.string(),
				siteId: z.uuid(),
				site: z.string(),
				cause: z.enum(['amendment', 'majority']),
				because: z.string(),
				due: z.string(),
				overdue: z.boolean(),
				refused: z.string().nullable()
			})
		)
	}),
	handle: async ({ actor, params, query }) => ({
		items: (await findReconsents(actor, params.study as string, query)).tasks
	})
});
