import { z } from 'zod';
import { correctStratumInput } from '$lib/domain/randomisation/allocation.input';
import { correctStratum } from '$lib/domain/randomisation/stratum.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'Corrects the subject’s stratum as data; an allocation that was made stays.',
	body: correctStratumInput,
	needsVersion: true,
	response: z.object({ version: z.number(), afterAllocation: z.boolean() }),
	handle: ({ actor, params, body, version }) =>
		correctStratum(actor, params.study as string, params.subject as string, body, version)
});
