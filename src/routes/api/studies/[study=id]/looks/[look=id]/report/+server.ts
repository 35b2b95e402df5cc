import { z } from 'zod';
import { makeReport } from '$lib/domain/report/report.commands.server';
import { reportOutput } from '$lib/domain/report/report.output';
import { getReport } from '$lib/domain/report/report.reads.server';
import { endpoint } from '$lib/server/api/endpoint';

export const GET = endpoint({
	summary: 'The report of a look and its releases.',
	response: reportOutput,
	handle: ({ actor, params }) => getReport(actor, params.study as string, params.look as string)
});

export const POST = endpoint({
	summary: 'Begins the report of a finished look.',
	response: z.object({ id: z.uuid(), jobRunId: z.uuid() }),
	status: 202,
	handle: ({ actor, params }) => makeReport(actor, params.study as string, params.look as string)
});
