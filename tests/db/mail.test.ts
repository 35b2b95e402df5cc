import { SMTPServer, type SMTPServerOptions } from 'smtp-server';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { startMail } from '../../scripts/fakes/mail.mjs';
import { newId } from '../../src/lib/id';
import { systemActor } from '../../src/lib/server/actor';
import { changeOwn } from '../../src/lib/server/change';
import { config } from '../../src/lib/server/config';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { forgetSender } from '../../src/lib/server/jobs/queue';
import { queueMail } from '../../src/lib/server/mail/queue-mail';
import { MailTrouble, sendMail } from '../../src/lib/server/mail/send';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson } from '../support/people';

let db: FreshDatabase;
let opened: Database;
let catcher: Awaited<ReturnType<typeof startMail>>;
const settings = () => config().mail as { smtpUrl: string; from: string };

beforeAll(async () => {
	db = await freshDatabase();
	catcher = await startMail();
	useEnvironment(db, { SMTP_URL: catcher.smtpUrl, MAIL_FROM: 'Heddle <heddle@heddle.test>' });
	opened = openDatabase(db.appUrl, 4);
	useDatabase(opened);
	forgetSender();
});
afterAll(async () => {
	await opened?.close();
	await catcher?.stop();
	await db?.drop();
});

const link = 'https://heddle.test/invitation/a-secret-token-that-opens-something';
async function mailTo(email: string): Promise<string> {
	const personId = await addPerson(db, { email, name: 'Mina Shuttle' });
	return changeOwn(systemActor(newId()), 'test', (writer) =>
		queueMail(writer, {
			kind: 'invitation',
			personId,
			facts: { expires: '8 June 2026, 09:00 UTC' },
			secret: link
		})
	);
}
const row = async (id: string) =>
	(
		await db.sql(
			`select status, error, attempts, sent_at, secret, message_id from app.mail where id = '${id}'`
		)
	)[0]?.[0];
const send = (mailId: string, lastTry = false) => sendMail({ payload: { mailId }, lastTry });

/** A mail server that behaves as told, for the length of `work`. */
async function withServer(
	options: SMTPServerOptions,
	work: (received: () => number) => Promise<void>
) {
	let received = 0;
	const server = new SMTPServer({
		authOptional: true,
		disabledCommands: ['STARTTLS'],
		logger: false,
		...options,
		onData: (stream, session, done) => {
			stream.on('data', () => {});
			stream.on('end', () => {
				received++;
				if (options.onData) options.onData(stream, session, done);
				else done();
			});
		}
	});
	server.on('error', () => {});
	await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
	const { port } = server.server.address() as { port: number };
	const before = settings().smtpUrl;
	settings().smtpUrl = `smtp://127.0.0.1:${port}`;
	try {
		await work(() => received);
	} finally {
		settings().smtpUrl = before;
		await new Promise<void>((resolve) => server.close(resolve));
	}
}
const failing = (responseCode: number, text = 'no') =>
	Object.assign(new Error(text), { responseCode });

test('a mail arrives once with its own id, and its link is kept no longer', async () => {
	const id = await mailTo('mina@example.org');
	expect((await row(id)).secret).not.toBeNull();
	await send(id);
	await send(id);
	const arrived = catcher.messages.filter((m) => m.to.includes('mina@example.org'));
	expect(arrived).toHaveLength(1);
	expect(arrived[0]?.text).toContain(link);
	expect(arrived[0]?.headers['auto-submitted']).toBe('auto-generated');
	const after = await row(id);
	expect(arrived[0]?.headers['message-id']).toBe(after.message_id);
	expect(after).toMatchObject({ status: 'sent', secret: null, attempts: 1, error: null });
	expect(after.sent_at).toBeInstanceOf(Date);
});

test('ten tries at once send one mail', async () => {
	const id = await mailTo('many@example.org');
	await Promise.all(Array.from({ length: 10 }, () => send(id).catch(() => {})));
	expect(catcher.messages.filter((m) => m.to.includes('many@example.org')).length).toBe(1);
});

test('a recipient that is refused for good is not tried again, and the reason holds no address', async () => {
	const id = await mailTo('bounce.mina@example.org');
	await send(id);
	expect(await row(id)).toMatchObject({ status: 'failed', secret: null, attempts: 1 });
	expect((await row(id)).error).toContain('550');
	expect((await row(id)).error).not.toContain('@');
});

test('a server that asks to be tried later is tried later, and at the last try the mail has failed', async () => {
	const id = await mailTo('later@example.org');
	await withServer({ onRcptTo: (_, __, done) => done(failing(451)) }, async () => {
		await expect(send(id)).rejects.toBeInstanceOf(MailTrouble);
		expect(await row(id)).toMatchObject({ status: 'waiting', attempts: 1 });
		expect((await row(id)).secret).not.toBeNull();
		await expect(send(id, true)).rejects.toBeInstanceOf(MailTrouble);
		expect(await row(id)).toMatchObject({ status: 'failed', attempts: 2, secret: null });
	});
});

test('a server that is not there is tried again, and then the mail arrives', async () => {
	const id = await mailTo('absent@example.org');
	const before = settings().smtpUrl;
	settings().smtpUrl = 'smtp://127.0.0.1:9';
	await expect(send(id)).rejects.toBeInstanceOf(MailTrouble);
	settings().smtpUrl = before;
	expect(await row(id)).toMatchObject({ status: 'waiting' });
	await send(id);
	expect(await row(id)).toMatchObject({ status: 'sent', attempts: 2 });
});

describe('a connection that breaks', () => {
	/** Ends every connection of the server at the given step. */
	const cutting = (step: 'onRcptTo' | 'onData'): SMTPServerOptions => {
		let server: { connections: Set<{ _socket: { destroy(): void } }> } | undefined;
		return {
			onConnect(_, done) {
				server = this as unknown as typeof server;
				done();
			},
			[step]: () => {
				for (const connection of server?.connections ?? []) connection._socket.destroy();
			}
		};
	};

	test('before the server took the text: the mail is tried again', async () => {
		const id = await mailTo('early@example.org');
		await withServer(cutting('onRcptTo'), async (received) => {
			await expect(send(id)).rejects.toBeInstanceOf(MailTrouble);
			expect(received()).toBe(0);
			expect(await row(id)).toMatchObject({ status: 'waiting' });
		});
	});

	test('after the server had the text: nobody knows, so it is not sent twice', async () => {
		const id = await mailTo('cut@example.org');
		await withServer(cutting('onData'), async (received) => {
			await send(id);
			expect(received()).toBe(1);
			expect(await row(id)).toMatchObject({ status: 'doubtful', secret: null });
			await send(id);
			expect(received()).toBe(1);
		});
	});
});

test('a mail whose sender died while handing it over is marked doubtful, not sent again', async () => {
	const id = await mailTo('died@example.org');
	await db.sql(
		`set heddle.actor = '00000000-0000-7000-8000-000000000001'`,
		`update app.mail set status = 'sending' where id = '${id}'`
	);
	await send(id);
	expect(await row(id)).toMatchObject({ status: 'doubtful', secret: null });
	expect(catcher.messages.filter((m) => m.to.includes('died@example.org'))).toEqual([]);
});

test('somebody switched off meanwhile gets no mail', async () => {
	const id = await mailTo('off@example.org');
	await db.sql(
		`set heddle.actor = '00000000-0000-7000-8000-000000000001'`,
		`update app.person set active = false where email = 'off@example.org'`
	);
	await send(id);
	expect(await row(id)).toMatchObject({ status: 'no address', secret: null });
});

test('a name can add neither a header nor a recipient', async () => {
	const personId = newId();
	await db.sql(
		`set heddle.actor = '00000000-0000-7000-8000-000000000001'`,
		`insert into app.person (id, email, name) values ('${personId}', 'inject@example.org', E'Eve\r\nBcc: other@example.org\r\n\r\nhello')`
	);
	const id = await changeOwn(systemActor(newId()), 'test', (writer) =>
		queueMail(writer, {
			kind: 'reset',
			personId,
			facts: { expires: '8 June 2026, 09:00 UTC' },
			secret: link
		})
	);
	await send(id);
	const mail = catcher.messages.find((m) => m.to.includes('inject@example.org'));
	expect(mail?.to).toEqual(['inject@example.org']);
	expect(mail?.headers.bcc).toBeUndefined();
	expect(mail?.subject).not.toContain('Bcc');
});
