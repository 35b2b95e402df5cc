import { z } from 'zod';
import { logContact } from '$lib/domain/visit/chase.commands.server';
import { getChase } from '$lib/domain/visit/chase.reads.server';
import { logContactInput } from '$lib/domain/visit/visit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Attempts to reach the subject about this visit, latest first',
	response: z.object({
		items: z.array(
			z.object({
				id: z.string(),
				at: z.string(),
				way: z.string(),
				outcome: z.string(),
				nextStep: z.string().nullable(),
				tryAgainOn: z.string().nullable(),
				by: z.string()
			})
		)
	}),
	handle: async ({ actor, params }) => ({
		items: (await getChase(actor, params.study as string, params.visit as string, 'subject.read'))
			.contacts
	})
});

export const POST = endpoint({
	summary: 'Write down an attempt to reach the subject',
	body: logContactInput,
	response: z.object({ id: z.string(), version: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) =>
		logContact(actor, params.study as string, params.visit as string, body)
});
