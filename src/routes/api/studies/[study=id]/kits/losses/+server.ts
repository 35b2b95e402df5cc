import { z } from 'zod';
import { loseKit } from '$lib/domain/kit/kit.commands.server';
import { kitFateInput } from '$lib/domain/kit/kit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'A kit that nobody was given is damaged or lost.',
	body: kitFateInput,
	response: z.object({ kitNumber: z.string() }),
	handle: ({ actor, params, body }) => loseKit(actor, params.study as string, body)
});
