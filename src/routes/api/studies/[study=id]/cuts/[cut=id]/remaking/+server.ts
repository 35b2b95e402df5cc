import { z } from 'zod';
import { remakeCut } from '$lib/domain/cut/cut.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'The fingerprint of the same cut, made again from the live data and their trail.',
	response: z.object({
		number: z.number(),
		fingerprint: z.string(),
		again: z.string().nullable(),
		same: z.boolean()
	}),
	handle: ({ actor, params }) => remakeCut(actor, params.study as string, params.cut as string)
});
