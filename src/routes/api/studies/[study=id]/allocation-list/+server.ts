import { z } from 'zod';
import {
	askForList,
	getAllocationState
} from '$lib/domain/randomisation/allocation.commands.server';
import { askForListInput } from '$lib/domain/randomisation/allocation.input';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'Whether there is an allocation list: its method, hash and count, never what it holds.',
	response: z.object({
		record: z
			.object({
				method: z.string(),
				hash: z.string(),
				count: z.number(),
				madeAt: z.iso.datetime(),
				askedBy: z.string()
			})
			.nullable(),
		used: z.number(),
		job: z
			.object({
				id: z.uuid(),
				status: z.string(),
				fraction: z.number(),
				message: z.string()
			})
			.nullable()
	}),
	handle: async ({ actor, params }) => {
		const { record, used, job } = await getAllocationState(actor, params.study as string);
		return { record: record && { ...record, madeAt: record.madeAt.toISOString() }, used, job };
	}
});

export const POST = endpoint({
	summary:
		'Asks for the allocation list, once. Where the study minimises, with the chance of the favoured arm.',
	body: askForListInput,
	response: z.object({ jobRunId: z.uuid() }),
	status: 201,
	handle: ({ actor, params, body }) => askForList(actor, params.study as string, body)
});
