import { z } from 'zod';
import { unmaskSubject } from '$lib/domain/unmasking/unmasking.commands.server';
import { unmaskInput } from '$lib/domain/unmasking/unmasking.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Emergency unmasking: this subject’s arm, once, for the investigator who asks; named people are told that it happened.',
	body: unmaskInput,
	response: z.object({ arm: z.string(), subject: z.string(), unmaskingId: z.uuid() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		unmaskSubject(actor, params.study as string, params.subject as string, body)
});
