import { z } from 'zod';
import { lookSpec } from '$lib/domain/look/look.input';
import { findPlan, signPlan } from '$lib/domain/look/plan.server';
import { Refusal } from '$lib/refusal';
import { endpoint } from '$lib/server/api/endpoint';

const planOutput = z.object({
	spec: lookSpec,
	words: z.string(),
	signedBy: z.string(),
	signedAt: z.iso.datetime()
});

const found = async (...args: Parameters<typeof findPlan>) => {
	const plan = await findPlan(...args);
	if (!plan) throw new Refusal('NOT_FOUND');
	return plan;
};

export const GET = endpoint({
	summary: 'The monitoring plan: the one model that counts as planned.',
	response: planOutput,
	handle: ({ actor, params }) => found(actor, params.study as string)
});

export const POST = endpoint({
	summary: 'Signs the monitoring plan, once.',
	body: lookSpec,
	response: planOutput,
	status: 201,
	handle: async ({ actor, params, body }) => {
		await signPlan(actor, params.study as string, body);
		return found(actor, params.study as string);
	}
});
