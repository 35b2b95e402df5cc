import { z } from 'zod';
import { recordUnmasking } from '$lib/domain/unmasking/unmasking.commands.server';
import { outsideInput } from '$lib/domain/unmasking/unmasking.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Writes down that an arm became known outside Heddle: a sealed code opened, or by accident.',
	body: outsideInput,
	response: z.object({ unmaskingId: z.uuid() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		recordUnmasking(actor, params.study as string, params.subject as string, body)
});
