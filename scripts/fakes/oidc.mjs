// An identity provider that believes whatever e-mail address is given. For the local start and for tests only.
import { createServer } from 'node:http';
import { createHash } from 'node:crypto';
import { pathToFileURL } from 'node:url';
import { OAuth2Issuer, OAuth2Service } from 'oauth2-mock-server';

/** @param {unknown} text */
const escape = (text) =>
	String(text ?? '').replace(/[&<>"']/g, (sign) => `&#${sign.charCodeAt(0)};`);

/** @param {URLSearchParams} asked @param {string[]} emails */
const signInPage = (
	asked,
	emails
) => `<!doctype html><html lang="en"><head><meta charset="utf-8"><title>Practice identity provider</title>
<meta name="viewport" content="width=device-width"><style>:root{color-scheme:light dark}body{font:16px/1.5 system-ui,sans-serif;max-width:32rem;margin:3rem auto;padding:0 1rem}
label{display:block}input,button{font:inherit;padding:.6rem;width:100%;box-sizing:border-box;margin:.3rem 0 1rem}</style></head><body><main>
<h1>Practice identity provider</h1><p>It stands in for your organisation's own sign-in and asks for no password. It runs on this machine only.</p>
<form method="get" action="/authorize">
${[...asked]
	.filter(([name]) => name !== 'email')
	.map(([name, value]) => `<input type="hidden" name="${escape(name)}" value="${escape(value)}">`)
	.join('')}
<label for="email">E-mail address</label>
<input id="email" name="email" type="email" required autofocus autocomplete="off" list="known">
<datalist id="known">${emails.map((email) => `<option value="${escape(email)}">`).join('')}</datalist>
<button>Sign in</button></form></main></body></html>`;

/**
 * @param {{ port?: number, host?: string, emails?: () => string[] }} [options] emails: those offered on the page
 */
export async function startOidc({ port = 0, host = '127.0.0.1', emails = () => [] } = {}) {
	const issuer = new OAuth2Issuer();
	const service = new OAuth2Service(issuer);
	await issuer.keys.generate('RS256');

	/** Who asked for a code, and who an access token speaks for. @type {Map<string, string>} */
	const emailOf = new Map();
	const claims = (/** @type {string} */ email) => ({
		sub: createHash('sha256').update(email.toLowerCase()).digest('hex').slice(0, 32),
		email,
		email_verified: true,
		name: email.split('@')[0]
	});

	service.on('beforeAuthorizeRedirect', ({ url }, request) => {
		const email = new URL(request.url ?? '/', 'http://local').searchParams.get('email') ?? '';
		const code = url.searchParams.get('code');
		if (code) emailOf.set(code, email);
	});
	service.on('beforeTokenSigning', (token, request) => {
		const email = emailOf.get(request.body.code);
		if (email) Object.assign(token.payload, claims(email));
	});
	service.on('beforeResponse', (response, request) => {
		const { code } = request.body;
		const email = code && emailOf.get(code);
		// A code is good once, for a request that was made by way of the page.
		if (request.body.grant_type !== 'authorization_code' || !email) {
			response.statusCode = 400;
			response.body = { error: 'invalid_grant' };
			return;
		}
		emailOf.delete(code);
		if (typeof response.body === 'object' && response.body && 'access_token' in response.body)
			emailOf.set(String(response.body.access_token), email);
	});
	service.on('beforeUserinfo', (response, request) => {
		const email = emailOf.get((request.headers.authorization ?? '').replace(/^Bearer /i, ''));
		if (email) response.body = claims(email);
		else Object.assign(response, { statusCode: 401, body: { error: 'invalid_token' } });
	});

	const server = createServer((request, response) => {
		const url = new URL(request.url ?? '/', 'http://local');
		if (url.pathname === '/authorize' && !url.searchParams.get('email')) {
			response.writeHead(200, {
				'content-type': 'text/html; charset=utf-8',
				'cache-control': 'no-store'
			});
			return response.end(signInPage(url.searchParams, emails()));
		}
		service.requestHandler(request, response);
	});
	await new Promise((resolve, reject) => {
		server.once('error', reject);
		server.listen(port, host, () => resolve(undefined));
	});
	const address = server.address();
	issuer.url = `http://${host}:${typeof address === 'object' && address ? address.port : port}`;
	return {
		issuer: issuer.url,
		async stop() {
			server.closeAllConnections();
			await new Promise((done) => server.close(() => done(undefined)));
		}
	};
}

if (process.argv[1] && import.meta.url === pathToFileURL(process.argv[1]).href) {
	const { readFileSync } = await import('node:fs');
	const oidc = await startOidc({
		port: Number(process.env.FAKE_OIDC_PORT ?? 0),
		emails: () => {
			try {
				return JSON.parse(readFileSync(process.env.FAKE_OIDC_ACCOUNTS ?? '', 'utf8')).map(
					(/** @type {{ email: string }} */ a) => a.email
				);
			} catch {
				return []; // an empty installation has no accounts to offer
			}
		}
	});
	for (const signal of ['SIGTERM', 'SIGINT'])
		process.on(signal, () => oidc.stop().then(() => process.exit(0)));
	console.log('ready');
}
