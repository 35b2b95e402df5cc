import { z } from 'zod';

export const jobProgressOutput = z.object({
	id: z.string(),
	title: z.string(),
	status: z.enum(['waiting', 'running', 'done', 'failed', 'cancelled']),
	fraction: z.number(),
	message: z.string(),
	error: z.string().nullable(),
	cancelAsked: z.boolean(),
	mayCancel: z.boolean()
});
export const jobRowOutput = jobProgressOutput.extend({
	queue: z.string(),
	study: z.string().nullable(),
	requestedBy: z.string(),
	attempts: z.number(),
	createdAt: z.string(),
	finishedAt: z.string().nullable()
});
export const cancelInput = z.strictObject({ jobId: z.uuid('Choose a job of the list.') });
