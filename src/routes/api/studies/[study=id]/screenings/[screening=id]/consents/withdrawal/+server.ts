import { z } from 'zod';
import { withdrawConsent } from '$lib/domain/consent/consent.commands.server';
import { withdrawConsentInput } from '$lib/domain/consent/consent.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Marks a consent as withdrawn before enrolment: it stays in the record and does not count.',
	body: withdrawConsentInput,
	response: z.object({ version: z.number() }),
	handle: ({ actor, params, body }) =>
		withdrawConsent(actor, params.study as string, params.screening as string, body)
});
