import { z } from 'zod';
import { saveContactDetails } from '$lib/domain/subject/subject.commands.server';
import { contactInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const PUT = endpoint({
	summary: 'The subject’s contact details. Version 0: there are none yet.',
	body: contactInput,
	response: z.object({ version: z.number() }),
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		saveContactDetails(actor, params.study as string, params.subject as string, body, version)
});
