import { z } from 'zod';
import { recordConsent } from '$lib/domain/consent/consent.commands.server';
import { consentInput } from '$lib/domain/consent/consent.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Records a consent. Date and time are those of the site’s clocks.',
	body: consentInput,
	response: z.object({ id: z.uuid(), version: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		recordConsent(actor, params.study as string, params.screening as string, body)
});
