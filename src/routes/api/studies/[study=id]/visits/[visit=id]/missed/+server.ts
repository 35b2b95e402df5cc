import { z } from 'zod';
import { declareMissed } from '$lib/domain/visit/chase.commands.server';
import { declareMissedInput } from '$lib/domain/visit/visit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Declare the visit missed; If-Match names the visit’s version',
	body: declareMissedInput,
	response: z.object({ version: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		declareMissed(actor, params.study as string, params.visit as string, version, body)
});
