import { z } from 'zod';
import { finishVisit } from '$lib/domain/visit/conduct.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Finish the visit; If-Match names the visit’s version',
	body: z.strictObject({}),
	response: z.object({
		version: z.number(),
		deviation: z.enum(['early visit', 'late visit']).nullable()
	}),
	needsVersion: true,
	handle: ({ actor, params, version }) =>
		finishVisit(actor, params.study as string, params.visit as string, version)
});
