import type { CutContent } from '$lib/domain/cut/content';
import { takeOutCut } from '$lib/domain/cut/cut.commands.server';
import { cutCsv } from '$lib/domain/cut/cut.export';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) => {
	const { number, text } = await serve(() =>
		takeOutCut(actorOf({ locals }), params.study, params.cut, 'csv')
	);
	return attachment(
		cutCsv(JSON.parse(text) as CutContent),
		`cut-${number}.csv`,
		'text/csv; charset=utf-8'
	);
};
