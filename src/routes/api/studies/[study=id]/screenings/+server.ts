import { z } from 'zod';
import { addScreening } from '$lib/domain/subject/screening.commands.server';
import { findScreenings } from '$lib/domain/subject/screening.reads.server';
import { screeningInput, screeningsQuery } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'The screening log, the newest first.',
	query: screeningsQuery,
	response: z.object({
		items: z.array(
			z.object({
				id: z.uuid(),
				number: z.number(),
				site: z.object({ code: z.string(), name: z.string() }),
				screenedOn: z.iso.date(),
				outcome: z.enum(['in progress', 'entered', 'not entered']),
				reason: z.string().nullable(),
				consents: z.number(),
				subject: z.object({ id: z.uuid(), number: z.string() }).nullable(),
				version: z.number()
			})
		),
		nextCursor: z.string().nullable()
	}),
	handle: ({ actor, params, query }) => findScreenings(actor, params.study as string, query)
});

export const POST = endpoint({
	summary: 'Adds somebody who was considered.',
	body: screeningInput,
	response: z.object({ id: z.uuid(), number: z.number(), version: z.number() }),
	status: 201,
	handle: ({ actor, params, body }) => addScreening(actor, params.study as string, body)
});
