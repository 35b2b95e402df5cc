import { z } from 'zod';
import { findFreeTimes } from '$lib/domain/visit/booking.reads.server';
import { freeTimesQuery } from '$lib/domain/visit/visit.input';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Free times on a day, for a room and a person',
	query: freeTimesQuery,
	response: z.object({
		date: z.string(),
		times: z.array(z.string()),
		staff: z.array(z.object({ id: z.string(), name: z.string() }))
	}),
	handle: ({ actor, params, query }) =>
		findFreeTimes(actor, params.study as string, params.visit as string, query)
});
