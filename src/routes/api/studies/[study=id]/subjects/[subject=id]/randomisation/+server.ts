import { z } from 'zod';
import { randomiseSubject } from '$lib/domain/subject/subject.commands.server';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary:
		'Randomises the subject, once. The answer is a kit number; and the arm, where the study masks nothing.',
	response: z.object({ kitNumber: z.string(), arm: z.string().nullable(), version: z.number() }),
	status: 201,
	handle: ({ actor, params }) =>
		randomiseSubject(actor, params.study as string, params.subject as string)
});
