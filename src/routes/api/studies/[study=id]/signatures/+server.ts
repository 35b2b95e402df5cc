import { z } from 'zod';
import { sign } from '$lib/domain/signature/signature.commands.server';
import { signInput } from '$lib/domain/signature/signature.input';
import { recordKinds } from '$lib/domain/signature/signature';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Signs records as they were shown, one signature each, all or none. Needs the password, and the address after a break.',
	body: signInput,
	response: z.object({
		signatures: z.array(z.object({ id: z.uuid(), record: z.enum(recordKinds), recordId: z.uuid() }))
	}),
	status: 201,
	handle: ({ actor, params, body }) => sign(actor, params.study as string, body)
});
