import { contentType } from '$lib/domain/calendar/calendar';
import { readFeed } from '$lib/domain/feed/feed.reads.server';
import type { RequestHandler } from './$types';

/** Public: whoever holds the address reads times and rooms, and nothing else. */
export const GET: RequestHandler = async ({ params, request, locals }) => {
	const found = /^[\w-]{43}$/.test(params.token)
		? await readFeed(params.token, locals.requestId)
		: null;
	// Nothing of a feed stays in a cache between us and the calendar program: revoking it ends it.
	const headers = { 'cache-control': 'no-store', 'x-robots-tag': 'noindex' };
	if (!found) return new Response('There is no calendar here.\n', { status: 404, headers });
	const etag = `"${found.mark}"`;
	const known = (request.headers.get('if-none-match') ?? '')
		.split(',')
		.map((each) => each.trim().replace(/^W\//, ''));
	if (known.includes(etag))
		return new Response(null, { status: 304, headers: { ...headers, etag } });
	return new Response(found.text, {
		headers: { ...headers, etag, 'content-type': contentType({ method: null }) }
	});
};
