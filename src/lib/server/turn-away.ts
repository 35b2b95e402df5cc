import type { RequestEvent } from '@sveltejs/kit';
import bold from '@fontsource/atkinson-hyperlegible/files/atkinson-hyperlegible-latin-700-normal.woff2?url';
import plain from '@fontsource/atkinson-hyperlegible/files/atkinson-hyperlegible-latin-400-normal.woff2?url';
import type { Refusal } from '$lib/refusal';
import { problem } from './api/problem';

const titles: Record<number, string> = {
	401: 'Please sign in',
	403: 'Not for your role',
	404: 'Nothing here',
	423: 'The screen is locked'
};

const escape = (text: string) => text.replace(/[&<>"]/g, (mark) => `&#${mark.charCodeAt(0)};`);

/** The guard's own page: nothing of the application is rendered for who is turned away, not even its frame. */
const page = (title: string, said: string) => `<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>${escape(title)} · Heddle</title>
<style>
@font-face { font-family: 'Atkinson Hyperlegible'; src: url('${plain}') format('woff2'); font-weight: 400; }
@font-face { font-family: 'Atkinson Hyperlegible'; src: url('${bold}') format('woff2'); font-weight: 700; }
:root { color-scheme: light dark; --ground: #fbf8f2; --ink: #16213f; --act: #28396b; }
@media (prefers-color-scheme: dark) { :root { --ground: #14181f; --ink: #e8dfcf; --act: #a9b6e6; } }
body { margin: 0; background: var(--ground); color: var(--ink); font: 1rem/1.45 'Atkinson Hyperlegible', sans-serif; }
main { max-width: 36rem; margin: 0 auto; padding: 4rem 1.5rem; }
h1 { font-size: 1.875rem; line-height: 1.2; }
a { color: var(--act); text-underline-offset: 3px; }
:focus-visible { outline: 3px solid var(--act); outline-offset: 2px; }
</style>
</head>
<body><main><h1>${escape(title)}</h1><p>${escape(said)}</p><p><a href="/">Back to your start page</a></p></main></body>
</html>
`;

type Asked = Pick<RequestEvent, 'request' | 'isDataRequest' | 'url' | 'locals'>;

const byScript = (event: Asked) => event.request.headers.get('x-sveltekit-action') === 'true';

/**
 * A refusal as the asker can read it: problem details for the API, the framework's own form for a navigation or a form
 * sent by script, else a page. Answered and not thrown, so that it carries the headers that every answer carries.
 */
export function turnAway(event: Asked, refusal: Refusal): Response {
	const { status, message, code } = refusal;
	if (event.url.pathname.startsWith('/api/')) return problem(refusal, event.locals.requestId);
	const headers = { 'cache-control': 'no-store' };
	if (event.isDataRequest) return Response.json({ message, code }, { status, headers });
	if (byScript(event))
		return Response.json({ type: 'error', status, error: { message, code } }, { status, headers });
	return new Response(page(titles[status] ?? 'This was not carried out', message), {
		status,
		headers: {
			...headers,
			'content-type': 'text/html; charset=utf-8',
			'content-security-policy':
				"default-src 'none'; style-src 'unsafe-inline'; font-src 'self'; base-uri 'none'; form-action 'none'; frame-ancestors 'none'"
		}
	});
}

/** To another page of ours, for a page as for a navigation by script. */
export function sendTo(event: Asked, location: string): Response {
	const headers = { 'cache-control': 'no-store' };
	return event.isDataRequest
		? Response.json({ type: 'redirect', location }, { headers })
		: new Response(null, { status: 303, headers: { ...headers, location } });
}
