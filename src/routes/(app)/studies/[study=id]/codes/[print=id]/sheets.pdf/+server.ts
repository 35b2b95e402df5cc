import { readCodeSheets } from '$lib/domain/unmasking/codes.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) =>
	attachment(
		await serve(() => readCodeSheets(actorOf({ locals }), params.study, params.print)),
		'sealed-codes.pdf',
		'application/pdf'
	);
