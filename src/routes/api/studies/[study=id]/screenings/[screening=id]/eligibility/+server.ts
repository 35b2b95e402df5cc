import { z } from 'zod';
import { answerEligibility } from '$lib/domain/subject/screening.commands.server';
import { eligibilityInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'The answers to the eligibility criteria.',
	body: eligibilityInput,
	response: z.object({ version: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		answerEligibility(actor, params.study as string, params.screening as string, body, version)
});
