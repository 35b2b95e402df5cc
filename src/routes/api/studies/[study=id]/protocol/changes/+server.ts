import { z } from 'zod';
import { findNews } from '$lib/domain/study/draft.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'What was changed in the newest protocol version since it had the version given.',
	query: z.strictObject({ since: z.coerce.number().int().min(0).max(1_000_000_000).default(0) }),
	response: z.object({
		id: z.uuid(),
		version: z.number(),
		status: z.enum(['draft', 'published']),
		definition: z.record(z.string(), z.unknown()).nullable(),
		changes: z.array(
			z.object({
				who: z.string(),
				own: z.boolean(),
				at: z.iso.datetime(),
				says: z.array(z.string())
			})
		),
		findings: z.array(
			z.object({
				weight: z.enum(['stops', 'warns']),
				path: z.string(),
				say: z.string(),
				section: z.string(),
				place: z.string()
			})
		)
	}),
	handle: ({ actor, params, query }) => findNews(actor, params.study as string, query.since)
});
