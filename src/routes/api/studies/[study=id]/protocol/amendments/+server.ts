import { z } from 'zod';
import { createAmendment } from '$lib/domain/amendment/amendment.commands.server';
import { amendmentInput } from '$lib/domain/amendment/amendment.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Begins an amendment: a new draft from the newest published version.',
	body: amendmentInput,
	response: z.object({ protocolVersionId: z.uuid(), number: z.number(), version: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) => createAmendment(actor, params.study as string, body)
});
