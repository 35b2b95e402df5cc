import { z } from 'zod';
import { closeScreening } from '$lib/domain/subject/screening.commands.server';
import { notEnteredInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Closes the screening: the person was not entered, and why.',
	body: notEnteredInput,
	response: z.object({ version: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		closeScreening(actor, params.study as string, params.screening as string, body.reason, version)
});
