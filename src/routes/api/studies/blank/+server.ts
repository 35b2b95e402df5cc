import { z } from 'zod';
import { createBlankStudy } from '$lib/domain/study/study.commands.server';
import { createBlankInput } from '$lib/domain/study/study.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'A new study from nothing, as a draft with one visit and one measure.',
	body: createBlankInput,
	response: z.object({ studyId: z.uuid() }),
	status: 201,
	handle: ({ actor, body }) => createBlankStudy(actor, body)
});
