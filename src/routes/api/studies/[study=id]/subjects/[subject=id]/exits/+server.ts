import { z } from 'zod';
import { recordExit } from '$lib/domain/subject/exit.commands.server';
import { exitInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Records how and when a subject left, or stopped the treatment.',
	body: exitInput,
	response: z.object({ id: z.uuid(), version: z.number(), visitsEnded: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		recordExit(actor, params.study as string, params.subject as string, body)
});
