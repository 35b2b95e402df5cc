import { z } from 'zod';
import { getHistory, historyItem } from '$lib/domain/measurement/history.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Every state of a measurement, oldest first',
	response: z.object({ items: z.array(historyItem) }),
	handle: async ({ actor, params }) => ({
		items: await getHistory(
			actor,
			params.study as string,
			params.visit as string,
			params.measure as string
		)
	})
});
