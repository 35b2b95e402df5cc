import { z } from 'zod';
import { receiveKits } from '$lib/domain/kit/kit.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'A delivery came in at its site.',
	response: z.object({ kits: z.number() }),
	handle: ({ actor, params }) =>
		receiveKits(actor, params.study as string, params.delivery as string)
});
