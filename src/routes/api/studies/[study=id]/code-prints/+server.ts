import { z } from 'zod';
import { askForCodes } from '$lib/domain/unmasking/codes.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Asks for sheets of sealed codes: for each kit of the site that has none yet.',
	body: z.strictObject({ siteId: z.uuid('Choose one of the list.') }),
	response: z.object({ id: z.uuid(), jobRunId: z.uuid() }),
	status: 201,
	handle: ({ actor, params, body }) => askForCodes(actor, params.study as string, body.siteId)
});
