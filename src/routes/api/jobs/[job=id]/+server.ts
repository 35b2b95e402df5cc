import { jobProgressOutput } from '$lib/domain/job/job.input';
import { getJob } from '$lib/domain/job/job.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'How far a job is',
	response: jobProgressOutput,
	handle: ({ actor, params }) => getJob(actor, params.job ?? '')
});
