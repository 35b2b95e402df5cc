import { z } from 'zod';
import { largestDefinitionFile } from '$lib/domain/study/definition-file';
import { createStudyFromFile } from '$lib/domain/study/study.commands.server';
import { createFromFileInput } from '$lib/domain/study/study.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'A new study from a study definition, which is the whole body, as a draft.',
	body: z.record(z.string(), z.unknown()),
	query: createFromFileInput,
	response: z.object({ studyId: z.uuid() }),
	status: 201,
	limit: largestDefinitionFile,
	handle: ({ actor, body, query }) =>
		createStudyFromFile(actor, Buffer.from(JSON.stringify(body)), query)
});
