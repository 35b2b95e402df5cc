import { z } from 'zod';
import { cancelJob } from '$lib/domain/job/job.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Ask a job to stop',
	body: z.strictObject({}),
	response: z.object({ asked: z.boolean() }),
	handle: async ({ actor, params }) => {
		await cancelJob(actor, params.job ?? '');
		return { asked: true };
	}
});
