import { z } from 'zod';
import { refuseReconsent } from '$lib/domain/consent/consent.commands.server';
import { refuseReconsentInput } from '$lib/domain/consent/consent.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Records that a subject was asked again and refused; the version consented to before stays.',
	body: refuseReconsentInput,
	response: z.object({ id: z.uuid(), version: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		refuseReconsent(actor, params.study as string, params.subject as string, body)
});
