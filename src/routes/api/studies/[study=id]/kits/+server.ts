import { z } from 'zod';
import { planKits } from '$lib/domain/kit/kit.commands.server';
import { kitPlanInput } from '$lib/domain/kit/kit.input';
import { getKitStock } from '$lib/domain/kit/kit.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

const count = z.number().int();

export const GET = endpoint({
	summary: 'The kits of each site in numbers over all arms, and the deliveries.',
	response: z.object({
		useDays: count.nullable(),
		randomised: z.boolean(),
		begun: z.boolean(),
		sites: z.array(
			z.object({
				siteId: z.uuid(),
				site: z.string(),
				fullStock: count.nullable(),
				resupplyAt: count.nullable(),
				least: count.nullable(),
				version: count,
				toGive: count,
				onTheWay: count,
				given: count,
				expired: count,
				damaged: count,
				lost: count,
				low: z.boolean(),
				mayKeep: z.boolean()
			})
		),
		deliveries: z.array(
			z.object({
				id: z.uuid(),
				siteId: z.uuid(),
				site: z.string(),
				number: count,
				kits: count,
				expires: z.string(),
				sent: z.string(),
				received: z.string().nullable(),
				numbers: z.array(z.string())
			})
		)
	}),
	handle: ({ actor, params }) => getKitStock(actor, params.study as string)
});

export const POST = endpoint({
	summary: 'Begins to keep a stock of kits, before the first is given.',
	body: kitPlanInput,
	response: z.object({ useDays: count }),
	status: 201,
	handle: ({ actor, params, body }) => planKits(actor, params.study as string, body)
});
