import { z } from 'zod';
import { sendKits } from '$lib/domain/kit/kit.commands.server';
import { sendKitsInput } from '$lib/domain/kit/kit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Sends a site what it takes to be full again.',
	body: sendKitsInput,
	response: z.object({ id: z.uuid(), kits: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) => sendKits(actor, params.study as string, body)
});
