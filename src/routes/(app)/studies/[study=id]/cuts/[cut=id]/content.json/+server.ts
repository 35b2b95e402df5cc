import { takeOutCut } from '$lib/domain/cut/cut.commands.server';
import { attachment } from '$lib/server/attachment';
import { actorOf, serve } from '$lib/server/serve';
import type { RequestHandler } from './$types';

export const GET: RequestHandler = async ({ locals, params }) => {
	const { number, text } = await serve(() =>
		takeOutCut(actorOf({ locals }), params.study, params.cut, 'json')
	);
	// The canonical text itself: its SHA-256 is the cut's fingerprint.
	return attachment(text, `cut-${number}.json`, 'application/json');
};
