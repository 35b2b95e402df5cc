import { readReportFile } from '$lib/domain/report/report-file.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) =>
	attachment(
		await serve(() => readReportFile(actorOf({ locals }), params.study, params.look)),
		'report.pdf',
		'application/pdf'
	);
