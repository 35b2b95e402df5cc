import { z } from 'zod';
import { recordReconsent } from '$lib/domain/consent/consent.commands.server';
import { consentInput } from '$lib/domain/consent/consent.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Records that a subject was asked again and consented; the newest version applies from then on.',
	body: consentInput,
	response: z.object({
		id: z.uuid(),
		version: z.number(),
		follows: z.number(),
		visits: z.object({ moved: z.number(), made: z.number(), dropped: z.number() })
	}),
	status: 201,
	handle: ({ actor, params, body }) =>
		recordReconsent(actor, params.study as string, params.subject as string, body)
});
