import { z } from 'zod';
import { signatureView } from '$lib/domain/signature/signature.input';
import { getScreening } from '$lib/domain/subject/screening.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'One person of the screening log: answers and consents so far.',
	response: z.object({
		id: z.uuid(),
		number: z.number(),
		version: z.number(),
		screenedOn: z.iso.date(),
		outcome: z.enum(['in progress', 'entered', 'not entered']),
		reason: z.string().nullable(),
		answers: z.record(z.string(), z.enum(['yes', 'no'])),
		consents: z.array(
			z.object({
				id: z.uuid(),
				label: z.string(),
				signedAt: z.string(),
				signedBy: z.string(),
				explainedBy: z.string()
			})
		),
		signatures: z.array(signatureView),
		subject: z.object({ id: z.uuid(), number: z.string() }).nullable()
	}),
	handle: async ({ actor, params }) => {
		const { id, number, version, screenedOn, outcome, reason, answers, ...rest } =
			await getScreening(actor, params.study as string, params.screening as string);
		const { consents, signatures, subject } = rest;
		return {
			id,
			number,
			version,
			screenedOn,
			outcome,
			reason,
			answers,
			consents,
			signatures,
			subject
		};
	}
});
