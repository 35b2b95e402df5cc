import { z } from 'zod';
import { letFollowNow } from '$lib/domain/amendment/amendment.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Lets everybody who need not be asked again follow the newest protocol version.',
	response: z.object({ followed: z.number(), jobRunId: z.uuid().nullable() }),
	handle: ({ actor, params }) => letFollowNow(actor, params.study as string)
});
