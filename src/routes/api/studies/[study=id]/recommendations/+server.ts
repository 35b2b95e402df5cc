import { z } from 'zod';
import { recommendationInput } from '$lib/domain/board/board.input';
import { recommend } from '$lib/domain/board/board.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Records what the board advises on a pack.',
	body: recommendationInput,
	response: z.object({ id: z.uuid() }),
	status: 201,
	handle: ({ actor, params, body }) => recommend(actor, params.study as string, body)
});
