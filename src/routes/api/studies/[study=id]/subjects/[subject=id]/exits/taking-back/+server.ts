import { z } from 'zod';
import { takeBackExit } from '$lib/domain/subject/exit.commands.server';
import { takeBackInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Takes a way out back, with a reason. The entry stays, marked; visits that ended with it are to come again.',
	body: takeBackInput,
	response: z.object({ id: z.uuid(), version: z.number(), visitsToCome: z.number() }),
	handle: ({ actor, params, body }) =>
		takeBackExit(actor, params.study as string, params.subject as string, body)
});
