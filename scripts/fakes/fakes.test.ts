import { createHash, randomBytes } from 'node:crypto';
import { mkdtempSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import nodemailer from 'nodemailer';
import { afterEach, describe, expect, it } from 'vitest';
import { startMail } from './mail.mjs';
import { startOidc } from './oidc.mjs';

const stops: (() => Promise<void>)[] = [];
afterEach(async () => {
	for (const stop of stops.splice(0)) await stop();
});

describe('the mail catcher', () => {
	const start = async (folder?: string) => {
		const mail = await startMail({ folder });
		stops.push(() => mail.stop());
		const transport = nodemailer.createTransport(mail.smtpUrl, { from: 'heddle@heddle.test' });
		return { mail, transport };
	};
	const ics = 'BEGIN:VCALENDAR\r\nMETHOD:REQUEST\r\nEND:VCALENDAR\r\n';
	const hostile = {
		to: 'ann@site.example',
		subject: 'Visit <script>alert(1)</script>',
		text: 'Open http://127.0.0.1:1/reset/abc and <b>go</b>',
		html: '<p>Open <a href="http://127.0.0.1:1/reset/abc">it</a></p><script>alert(1)</script>',
		icalEvent: { method: 'REQUEST', filename: 'visit.ics', content: ics }
	};

	it('keeps what was sent, to whom it was really sent, and its calendar part with its method', async () => {
		const { mail, transport } = await start();
		await transport.sendMail(hostile);
		expect(mail.messages).toHaveLength(1);
		const [message] = mail.messages;
		expect(message).toMatchObject({ to: ['ann@site.example'], subject: hostile.subject });
		expect(message!.text).toContain('http://127.0.0.1:1/reset/abc');
		const calendar = message!.attachments.find((a) => a.type.startsWith('text/calendar'))!;
		expect(calendar.type).toContain('method=REQUEST');
		expect(Buffer.from(calendar.content, 'base64').toString()).toContain('METHOD:REQUEST');
		expect(message!.attachments.map((a) => a.name)).toContain('visit.ics');
	});

	it('turns a bouncing address away with 550 and keeps nothing of it', async () => {
		const { mail, transport } = await start();
		await expect(
			transport.sendMail({ ...hostile, to: 'bounce.later@site.example' })
		).rejects.toMatchObject({ responseCode: 550 });
		expect(mail.messages).toEqual([]);
	});

	it('shows a mail as text with links, its web page shut in, its attachments to download', async () => {
		const { mail, transport } = await start();
		await transport.sendMail(hostile);
		const id = mail.messages[0]!.id;
		const get = (path: string) => fetch(mail.pageUrl + path);
		for (const path of ['/', `/mail/${id}`]) {
			const page = await (await get(path)).text();
			expect(page).toContain('Visit &#60;script&#62;');
			expect(page).not.toContain('<script>');
		}
		const page = await (await get(`/mail/${id}`)).text();
		expect(page).toContain('<a href="http://127.0.0.1:1/reset/abc"');
		expect(page).toMatch(/<iframe[^>]+sandbox="[^"]*"/);
		expect((await get(`/mail/${id}/html`)).headers.get('content-security-policy')).toMatch(
			/^sandbox (?!.*allow-scripts)/
		);
		const file = await get(`/mail/${id}/file/0`);
		expect(file.headers.get('content-disposition')).toMatch(/^attachment/);
		expect((await get('/mail/none')).status).toBe(404);
	});

	it('still has the mail after a restart, until it is emptied', async () => {
		const folder = mkdtempSync(join(tmpdir(), 'heddle-mail-'));
		const first = await start(folder);
		await first.transport.sendMail(hostile);
		const second = await start(folder);
		const list = await (await fetch(`${second.mail.pageUrl}/messages?to=ANN@site.example`)).json();
		expect(list.map((m: { subject: string }) => m.subject)).toEqual([hostile.subject]);
		await fetch(`${second.mail.pageUrl}/messages`, { method: 'DELETE' });
		expect((await start(folder)).mail.messages).toEqual([]);
	});
});

describe('the identity provider', () => {
	const verifier = randomBytes(32).toString('base64url');
	const start = async () => {
		const oidc = await startOidc({ emails: () => ['known@site.example'] });
		stops.push(() => oidc.stop());
		return oidc;
	};
	const asked = (more: Record<string, string> = {}) =>
		new URLSearchParams({
			response_type: 'code',
			client_id: 'heddle',
			redirect_uri: 'http://127.0.0.1:1/back',
			scope: 'openid email',
			state: 's"><script>',
			nonce: 'n1',
			code_challenge: createHash('sha256').update(verifier).digest('base64url'),
			code_challenge_method: 'S256',
			...more
		});
	const token = (issuer: string, code: string, code_verifier = verifier) =>
		fetch(`${issuer}/token`, {
			method: 'POST',
			headers: { authorization: `Basic ${Buffer.from('heddle:x').toString('base64')}` },
			body: new URLSearchParams({
				grant_type: 'authorization_code',
				code,
				code_verifier,
				redirect_uri: 'http://127.0.0.1:1/back'
			})
		});

	it('asks on a page which e-mail address to speak for', async () => {
		const { issuer } = await start();
		const answer = await fetch(`${issuer}/authorize?${asked()}`);
		expect(answer.status).toBe(200);
		const page = await answer.text();
		expect(page).toContain('known@site.example');
		expect(page).toContain('name="nonce" value="n1"');
		expect(page).not.toContain('<script>');
	});

	it('signs that address into the token, for one use of the code and the right verifier only', async () => {
		const { issuer } = await start();
		const code = async () => {
			const answer = await fetch(`${issuer}/authorize?${asked({ email: 'ann@site.example' })}`, {
				redirect: 'manual'
			});
			const to = new URL(answer.headers.get('location')!);
			expect(to.searchParams.get('state')).toBe('s"><script>');
			return to.searchParams.get('code')!;
		};
		const first = await code();
		const answer = await token(issuer, first);
		expect(answer.status).toBe(200);
		const { id_token, access_token } = await answer.json();
		const claims = JSON.parse(Buffer.from(id_token.split('.')[1], 'base64url').toString());
		expect(claims).toMatchObject({
			iss: issuer,
			aud: 'heddle',
			nonce: 'n1',
			email: 'ann@site.example',
			email_verified: true
		});
		expect(claims.sub).not.toBe('johndoe');
		const info = await fetch(`${issuer}/userinfo`, {
			headers: { authorization: `Bearer ${access_token}` }
		});
		expect(await info.json()).toMatchObject({ sub: claims.sub, email: 'ann@site.example' });
		expect((await token(issuer, first)).status).toBe(400);
		expect((await token(issuer, await code(), 'x'.repeat(43))).status).toBe(400);
		expect((await token(issuer, 'made-up')).status).toBe(400);
	});
});
