import { z } from 'zod';
import { publishAmendmentInput } from '$lib/domain/amendment/amendment.input';
import { publishProtocol } from '$lib/domain/study/study.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Publishes an amendment: when it was approved and whether people are asked again. It never changes afterwards.',
	body: publishAmendmentInput,
	response: z.object({
		protocolVersionId: z.uuid(),
		version: z.number(),
		followed: z.number(),
		jobRunId: z.uuid().nullable()
	}),
	status: 201,
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		publishProtocol(actor, params.study as string, version, body)
});
