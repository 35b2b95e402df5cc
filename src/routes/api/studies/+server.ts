import { z } from 'zod';
import { createStudy } from '$lib/domain/study/study.commands.server';
import { createStudyInput } from '$lib/domain/study/study.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'A new study from a template, as a draft.',
	body: createStudyInput,
	response: z.object({ studyId: z.uuid() }),
	status: 201,
	handle: ({ actor, body }) => createStudy(actor, body)
});
