import { z } from 'zod';
import { publishProtocol } from '$lib/domain/study/study.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Publishes the draft. It never changes again.',
	response: z.object({ protocolVersionId: z.uuid(), version: z.number() }),
	status: 201,
	needsVersion: true,
	handle: ({ actor, params, version }) => publishProtocol(actor, params.study as string, version)
});
