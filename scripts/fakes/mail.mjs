// Catches every mail instead of sending it, and shows it on a page. For the local start and for tests only.
import { randomUUID } from 'node:crypto';
import { mkdirSync, readdirSync, readFileSync, rmSync, writeFileSync } from 'node:fs';
import { createServer } from 'node:http';
import { join } from 'node:path';
import { pathToFileURL } from 'node:url';
import { simpleParser } from 'mailparser';
import { SMTPServer } from 'smtp-server';

/** @param {unknown} text */
const escape = (text) =>
	String(text ?? '').replace(/[&<>"']/g, (sign) => `&#${sign.charCodeAt(0)};`);

/** Plain text with its web addresses as links. @param {string} text */
const linked = (text) =>
	escape(text).replace(
		/https?:\/\/[^\s<>"']+/g,
		(address) => `<a href="${address}" rel="noreferrer">${address}</a>`
	);

/** @param {string} title @param {string} body */
const page = (
	title,
	body
) => `<!doctype html><html lang="en"><head><meta charset="utf-8"><title>${escape(title)}</title>
<meta name="viewport" content="width=device-width"><style>
:root{color-scheme:light dark}body{font:16px/1.5 system-ui,sans-serif;max-width:60rem;margin:2rem auto;padding:0 1rem}
table{border-collapse:collapse;width:100%}td,th{text-align:left;padding:.4rem .8rem .4rem 0;border-bottom:1px solid #8886;vertical-align:top}
pre{white-space:pre-wrap;overflow-wrap:anywhere;font:inherit;border:1px solid #8886;padding:1rem}iframe{width:100%;height:32rem;border:1px solid #8886;background:#fff}
</style></head><body><main>${body}</main></body></html>`;

/**
 * @typedef {object} Caught
 * @property {string} id
 * @property {string} from
 * @property {string[]} to   the addresses it was really sent to
 * @property {string} subject
 * @property {string} date
 * @property {string} text
 * @property {string} html
 * @property {Record<string, string>} headers
 * @property {{ name: string, type: string, size: number, content: string }[]} attachments content in base64
 * @property {string} raw
 */

/** @param {string} id @param {Buffer} raw @param {string} from @param {string[]} to @returns {Promise<Caught>} */
async function read(id, raw, from, to) {
	const mail = await simpleParser(raw);
	return {
		id,
		from,
		to,
		subject: mail.subject ?? '',
		date: (mail.date ?? new Date(0)).toISOString(),
		text: mail.text ?? '',
		html: mail.html || '',
		headers: Object.fromEntries(
			mail.headerLines.map(({ key, line }) => [key, line.slice(line.indexOf(':') + 1).trim()])
		),
		attachments: mail.attachments.map((part, number) => ({
			name:
				part.filename ?? `part-${number + 1}${part.contentType === 'text/calendar' ? '.ics' : ''}`,
			type: /** @type {string} */ (part.headers.get('content-type') && mailType(part)),
			size: part.size,
			content: part.content.toString('base64')
		})),
		raw: raw.toString('utf8')
	};
}

/** The type with its parameters: `method` matters in a calendar part. @param {import('mailparser').Attachment} part */
function mailType(part) {
	const header = /** @type {any} */ (part.headers.get('content-type'));
	const rest = Object.entries(header?.params ?? {}).map(([name, value]) => `; ${name}=${value}`);
	return (header?.value ?? part.contentType) + rest.join('');
}

/**
 * @param {{ smtpPort?: number, pagePort?: number, folder?: string, host?: string }} [options]
 */
export async function startMail({ smtpPort = 0, pagePort = 0, folder, host = '127.0.0.1' } = {}) {
	/** @type {Caught[]} */
	const messages = [];
	if (folder) {
		mkdirSync(folder, { recursive: true, mode: 0o700 });
		for (const name of readdirSync(folder)
			.filter((file) => file.endsWith('.json'))
			.sort())
			try {
				messages.push(JSON.parse(readFileSync(join(folder, name), 'utf8')));
			} catch {
				rmSync(join(folder, name), { force: true }); // half-written when an earlier run was killed
			}
	}
	let count = messages.length;

	const smtp = new SMTPServer({
		authOptional: true,
		disabledCommands: ['STARTTLS'],
		logger: false,
		onRcptTo({ address }, _session, done) {
			if (!/^bounce.*@/i.test(address)) return done();
			done(Object.assign(new Error('No such mailbox'), { responseCode: 550 }));
		},
		onData(stream, session, done) {
			/** @type {Buffer[]} */
			const parts = [];
			stream.on('data', (part) => parts.push(part));
			stream.on('end', async () => {
				try {
					const { mailFrom, rcptTo } = session.envelope;
					const to = rcptTo.map(({ address }) => address);
					const message = await read(
						randomUUID(),
						Buffer.concat(parts),
						mailFrom ? mailFrom.address : '',
						to
					);
					if (folder)
						writeFileSync(
							join(folder, `${String(++count).padStart(8, '0')}-${message.id}.json`),
							JSON.stringify(message),
							{ mode: 0o600 }
						);
					messages.push(message);
					done();
				} catch (error) {
					done(/** @type {Error} */ (error));
				}
			});
		}
	});
	smtp.on('error', () => {});

	const web = createServer((request, response) => {
		const url = new URL(request.url ?? '/', 'http://local');
		const send = (
			/** @type {number} */ status,
			/** @type {string} */ type,
			/** @type {string | Buffer} */ body,
			/** @type {Record<string, string>} */ headers = {}
		) => {
			response.writeHead(status, {
				'content-type': type,
				'cache-control': 'no-store',
				'x-content-type-options': 'nosniff',
				'referrer-policy': 'no-referrer',
				'content-security-policy':
					"default-src 'none'; style-src 'unsafe-inline'; frame-src 'self'",
				...headers
			});
			response.end(body);
		};
		const html = (/** @type {string} */ title, /** @type {string} */ body) =>
			send(200, 'text/html; charset=utf-8', page(title, body));
		if (url.pathname === '/messages') {
			if (request.method === 'DELETE') {
				messages.length = 0;
				if (folder)
					for (const name of readdirSync(folder)) rmSync(join(folder, name), { force: true });
				return send(204, 'text/plain', '');
			}
			const to = url.searchParams.get('to')?.toLowerCase();
			return send(
				200,
				'application/json',
				JSON.stringify(messages.filter((m) => !to || m.to.some((a) => a.toLowerCase() === to)))
			);
		}
		if (url.pathname === '/') {
			const rows = messages
				.map(
					(m) =>
						`<tr><td>${escape(m.date.slice(0, 16).replace('T', ' '))} UTC</td><td>${escape(m.to.join(', '))}</td><td><a href="/mail/${m.id}">${escape(m.subject || '(no subject)')}</a></td></tr>`
				)
				.reverse();
			return html(
				'Mail',
				`<h1>Mail that Heddle sent</h1><p>Nothing leaves this machine: every mail is caught and shown here.</p>${rows.length ? `<table><thead><tr><th>Sent</th><th>To</th><th>Subject</th></tr></thead><tbody>${rows.join('')}</tbody></table>` : '<p>No mail yet.</p>'}`
			);
		}
		const [, id, part, number] =
			/^\/mail\/([\w-]+)(?:\/(html|raw|file)(?:\/(\d+))?)?$/.exec(url.pathname) ?? [];
		const message = messages.find((m) => m.id === id);
		if (!message) return send(404, 'text/plain', 'Not here.');
		if (part === 'raw') return send(200, 'text/plain; charset=utf-8', message.raw);
		if (part === 'html')
			return send(200, 'text/html; charset=utf-8', message.html, {
				'content-security-policy':
					"sandbox allow-popups allow-popups-to-escape-sandbox; default-src 'none'; style-src 'unsafe-inline'; img-src data:"
			});
		if (part === 'file') {
			const file = message.attachments[Number(number)];
			if (!file) return send(404, 'text/plain', 'Not here.');
			return send(200, 'application/octet-stream', Buffer.from(file.content, 'base64'), {
				'content-disposition': `attachment; filename*=UTF-8''${encodeURIComponent(file.name)}`
			});
		}
		html(
			message.subject || 'Mail',
			`<p><a href="/">All mail</a></p><h1>${escape(message.subject || '(no subject)')}</h1>
<p>From ${escape(message.from)} to ${escape(message.to.join(', '))}, ${escape(message.date)} · <a href="/mail/${message.id}/raw">as sent</a></p>
${message.attachments.length ? `<h2>Attachments</h2><ul>${message.attachments.map((a, n) => `<li><a href="/mail/${message.id}/file/${n}">${escape(a.name)}</a> (${escape(a.type)}, ${a.size} bytes)</li>`).join('')}</ul>` : ''}
<h2>Text</h2><pre>${linked(message.text)}</pre>
${message.html ? `<h2>As a web page</h2><iframe title="The mail as a web page" sandbox="allow-popups allow-popups-to-escape-sandbox" src="/mail/${message.id}/html"></iframe>` : ''}`
		);
	});

	await new Promise((resolve, reject) => {
		smtp.server.once('error', reject);
		smtp.listen(smtpPort, host, () => resolve(undefined));
	});
	await new Promise((resolve, reject) => {
		web.once('error', reject);
		web.listen(pagePort, host, () => resolve(undefined));
	});
	const portOf = (/** @type {import('node:net').AddressInfo | string | null} */ address) =>
		typeof address === 'object' && address ? address.port : 0;
	const smtpAt = portOf(smtp.server.address());
	const pageAt = portOf(web.address());
	return {
		smtpUrl: `smtp://${host}:${smtpAt}`,
		pageUrl: `http://${host}:${pageAt}`,
		messages,
		async stop() {
			web.closeAllConnections();
			await Promise.all([
				new Promise((done) => smtp.close(() => done(undefined))),
				new Promise((done) => web.close(() => done(undefined)))
			]);
		}
	};
}

if (process.argv[1] && import.meta.url === pathToFileURL(process.argv[1]).href) {
	const mail = await startMail({
		smtpPort: Number(process.env.FAKE_SMTP_PORT ?? 0),
		pagePort: Number(process.env.FAKE_MAIL_PORT ?? 0),
		folder: process.env.FAKE_MAIL_DIR
	});
	for (const signal of ['SIGTERM', 'SIGINT'])
		process.on(signal, () => mail.stop().then(() => process.exit(0)));
	console.log('ready');
}
