import { z } from 'zod';
import { endpoint } from '$lib/server/api/endpoint';
import { lockSession } from '$lib/server/auth/session';

export const POST = endpoint({
	summary: 'Lock the screen; what was typed stays',
	body: z.strictObject({}),
	response: z.object({ locked: z.boolean() }),
	handle: async ({ actor }) => {
		await lockSession(actor);
		return { locked: true };
	}
});
