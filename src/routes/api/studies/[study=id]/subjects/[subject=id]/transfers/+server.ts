import { z } from 'zod';
import { transferInput } from '$lib/domain/subject/subject.input';
import { transferSubject } from '$lib/domain/subject/transfer.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Moves a subject to another site of the study; the number and the history stay.',
	body: transferInput,
	response: z.object({
		id: z.uuid(),
		version: z.number(),
		visitsMoved: z.number(),
		bookingsCancelled: z.number()
	}),
	status: 201,
	handle: ({ actor, params, body }) =>
		transferSubject(actor, params.study as string, params.subject as string, body)
});
