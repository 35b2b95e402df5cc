import { z } from 'zod';
import { startVisit } from '$lib/domain/visit/conduct.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Begin the visit today; If-Match names the visit’s version',
	body: z.strictObject({}),
	response: z.object({ version: z.number(), happenedOn: z.string() }),
	needsVersion: true,
	handle: ({ actor, params, version }) =>
		startVisit(actor, params.study as string, params.visit as string, version)
});
