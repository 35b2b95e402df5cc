import { z } from 'zod';
import { findUnmaskings } from '$lib/domain/unmasking/unmasking.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Every unmasking: who, when, which subject and why. No arm is in it.',
	response: z.object({
		items: z.array(
			z.object({
				id: z.uuid(),
				subjectId: z.uuid(),
				subject: z.string(),
				site: z.string(),
				kind: z.string(),
				happened: z.string(),
				recorded: z.string(),
				knownTo: z.string(),
				by: z.string(),
				reason: z.string(),
				impact: z.string().nullable()
			})
		),
		unmasked: z.array(z.object({ name: z.string(), role: z.string() }))
	}),
	handle: ({ actor, params }) => findUnmaskings(actor, params.study as string)
});
