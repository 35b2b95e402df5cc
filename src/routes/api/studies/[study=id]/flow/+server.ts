import { z } from 'zod';
import { getFlow } from '$lib/domain/flow/flow.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

const counted = z.object({ label: z.string(), n: z.number() });

export const GET = endpoint({
	summary: 'Counts of the participant flow; by arm only in an open-label study.',
	response: z.object({
		assessed: z.number(),
		inScreening: z.number(),
		excluded: z.array(counted),
		takenOver: z.number(),
		enrolled: z.number(),
		notRandomised: z.array(counted),
		columns: z.array(
			z.object({
				arm: z.string().nullable(),
				n: z.number(),
				discontinued: z.number(),
				ended: z.array(counted),
				completed: z.number(),
				inFollowUp: z.number(),
				measured: z.number()
			})
		)
	}),
	handle: async ({ actor, params }) => {
		const { randomises: _, ...flow } = (await getFlow(actor, params.study as string)).flow;
		return flow;
	}
});
