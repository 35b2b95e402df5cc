import { z } from 'zod';
import { requestLook } from '$lib/domain/look/look.commands.server';
import { lookInput } from '$lib/domain/look/look.input';
import { lookHeadOutput } from '$lib/domain/look/look.output';
import { findLooks } from '$lib/domain/look/look.reads.server';
import { endpoint } from '$lib/server/api/endpoint';
import { listed, pageQuery } from '$lib/server/api/page';

export const GET = endpoint({
	summary: 'Looks, the newest first. Of one by arm, others than its reader learn the number alone.',
	query: pageQuery,
	response: z.object({ items: z.array(lookHeadOutput), nextCursor: z.string().nullable() }),
	handle: async ({ actor, params, query }) =>
		listed(await findLooks(actor, params.study as string), query)
});

export const POST = endpoint({
	summary:
		'Asks for a look: pooled, by a characteristic, or (the independent statistician) by arm.',
	body: lookInput,
	response: z.object({ id: z.uuid(), number: z.number(), jobRunId: z.uuid() }),
	status: 202,
	handle: ({ actor, params, body }) => requestLook(actor, params.study as string, body)
});
