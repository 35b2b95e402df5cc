import { z } from 'zod';
import { freezeCut } from '$lib/domain/cut/cut.commands.server';
import { cutInput } from '$lib/domain/cut/cut.input';
import { cutOutput } from '$lib/domain/cut/cut.output';
import { findCuts } from '$lib/domain/cut/cut.reads.server';
import { endpoint } from '$lib/server/api/endpoint';
import { listed, pageQuery } from '$lib/server/api/page';

export const GET = endpoint({
	summary: 'Data cuts, the newest first.',
	query: pageQuery,
	response: z.object({ items: z.array(cutOutput), nextCursor: z.string().nullable() }),
	handle: async ({ actor, params, query }) =>
		listed(await findCuts(actor, params.study as string), query)
});

export const POST = endpoint({
	summary: 'Freezes the study as it stood at an instant.',
	body: cutInput,
	response: z.object({
		id: z.uuid(),
		number: z.number(),
		fingerprint: z.string(),
		subjects: z.number(),
		measurements: z.number()
	}),
	status: 201,
	handle: ({ actor, params, body }) => freezeCut(actor, params.study as string, body)
});
