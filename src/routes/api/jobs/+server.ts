import { z } from 'zod';
import { jobRowOutput } from '$lib/domain/job/job.input';
import { listJobs } from '$lib/domain/job/job.reads.server';
import { endpoint } from '$lib/server/api/endpoint';
import { pageQuery } from '$lib/server/api/page';

export const GET = endpoint({
	summary: 'All jobs, newest first',
	query: pageQuery,
	response: z.object({ items: z.array(jobRowOutput), nextCursor: z.string().nullable() }),
	handle: ({ actor, query }) => listJobs(actor, query)
});
