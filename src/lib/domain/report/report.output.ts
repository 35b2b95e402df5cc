import { z } from 'zod';

export const reportOutput = z.object({
	id: z.uuid(),
	kind: z.enum(['open', 'closed']),
	status: z.enum(['waiting', 'made', 'failed']),
	error: z.string().nullable(),
	sha256: z.string().nullable(),
	pages: z.number().nullable(),
	jobRunId: z.uuid().nullable(),
	madeAt: z.iso.datetime().nullable(),
	releases: z.array(
		z.object({
			id: z.uuid(),
			person: z.string(),
			status: z.enum(['asked', 'approved', 'ready', 'failed']),
			askedBy: z.string(),
			askedAt: z.iso.datetime(),
			approvedBy: z.string().nullable(),
			downloads: z.number(),
			mine: z.boolean()
		})
	)
});
