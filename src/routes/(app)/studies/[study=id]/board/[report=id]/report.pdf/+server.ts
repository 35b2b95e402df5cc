import { downloadCopy } from '$lib/domain/report/report-file.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) =>
	attachment(
		await serve(() => downloadCopy(actorOf({ locals }), params.study, params.report)),
		// A name in a folder of downloads tells nothing of the study or of what was compared.
		'report.pdf',
		'application/pdf'
	);
