import { problemsFile } from '$lib/domain/import/import.reads.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) =>
	attachment(
		await serve(() => problemsFile(actorOf({ locals }), params.study, params.batch)),
		'problems.csv',
		'text/csv; charset=utf-8'
	);
