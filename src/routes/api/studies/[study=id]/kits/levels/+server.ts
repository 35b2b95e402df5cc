import { z } from 'zod';
import { setKitLevel } from '$lib/domain/kit/kit.commands.server';
import { kitLevelInput } from '$lib/domain/kit/kit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'How many kits a site holds when full, and at how many it is filled up.',
	body: kitLevelInput,
	response: z.object({ version: z.number() }),
	handle: ({ actor, params, body }) => setKitLevel(actor, params.study as string, body)
});
