import { z } from 'zod';
import { enrolSubject } from '$lib/domain/subject/subject.commands.server';
import { enrolInput } from '$lib/domain/subject/subject.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Enters the screened person into the study. The version is the screening’s.',
	body: enrolInput,
	response: z.object({ id: z.uuid(), number: z.string(), version: z.number() }),
	status: 201,
	needsVersion: true,
	handle: ({ actor, params, body, version }) =>
		enrolSubject(actor, params.study as string, params.screening as string, body, version)
});
