import { z } from 'zod';
import { releaseReport } from '$lib/domain/report/report.commands.server';
import { releaseInput } from '$lib/domain/report/report.input';
import { endpoint } from '$lib/server/api/endpoint';

export const POST = endpoint({
	summary: 'Releases a report to named board members; for a closed one, asks for that.',
	body: releaseInput,
	response: z.object({
		releases: z.array(
			z.object({ id: z.uuid(), personId: z.uuid(), status: z.enum(['asked', 'approved']) })
		)
	}),
	status: 201,
	handle: ({ actor, params, body }) =>
		releaseReport(actor, params.study as string, params.report as string, body)
});
