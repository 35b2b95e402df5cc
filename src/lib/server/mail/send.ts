import { PassThrough } from 'node:stream';
import { createTransport } from 'nodemailer';
import type SMTPTransport from 'nodemailer/lib/smtp-transport';
import { clock } from '$lib/time/clock';
import { systemActor } from '../actor';
import { changeOwn, readOwn } from '../change';
import { config } from '../config';
import type { Delivery } from '../jobs/worker';
import { log } from '../log';
import { mailContent, type MailContent, type MailRow } from './content';

/** The mail server could not be reached or asked to be tried later: the queue tries again. */
export class MailTrouble extends Error {}

type Outcome =
	| { kind: 'sent' }
	| { kind: 'refused'; why: string }
	/** Certainly not handed over. */
	| { kind: 'later'; why: string }
	/** The connection broke while the mail was being handed over: it may have arrived. */
	| { kind: 'doubtful'; why: string };

/** One connection for one mail; `whole` is called once all of it has gone to a server that said it would take it. */
function transport(smtpUrl: string, whole: () => void) {
	const { hostname, protocol } = new URL(smtpUrl);
	const near = ['localhost', '127.0.0.1', '[::1]'].includes(hostname);
	const made = createTransport({
		url: smtpUrl,
		// Beyond this machine a mail travels encrypted or not at all.
		requireTLS: protocol === 'smtp:' && !near,
		connectionTimeout: 15_000,
		greetingTimeout: 15_000,
		socketTimeout: 60_000,
		disableFileAccess: true,
		disableUrlAccess: true
	} as SMTPTransport.Options);
	made.use('stream', (mail, done) => {
		mail.message.processFunc((input) => {
			const passing = new PassThrough();
			passing.once('end', whole);
			input.on('error', (error) => passing.destroy(error));
			return input.pipe(passing);
		});
		done();
	});
	return made;
}

/** What an error of the handing-over means. The server's own words may hold the address: only its code is kept. */
export function meaning(error: { code?: string; responseCode?: number }, whole: boolean): Outcome {
	const { responseCode, code } = error;
	// A refused sign-in or sender is our own trouble, not the recipient's: worth another try when it is put right.
	if (responseCode !== undefined && responseCode >= 500 && code !== 'EAUTH')
		return { kind: 'refused', why: `The mail server refused it for good (${responseCode}).` };
	if (responseCode !== undefined)
		return { kind: 'later', why: `The mail server did not take it now (${responseCode}).` };
	if (whole)
		return { kind: 'doubtful', why: 'The connection broke while it was being handed over.' };
	return { kind: 'later', why: `The mail server was not reached (${code ?? 'no answer'}).` };
}

async function hand(mail: MailRow, content: MailContent): Promise<Outcome> {
	const settings = config().mail;
	if (!settings) return { kind: 'later', why: 'No mail server is set up.' };
	let whole = false;
	try {
		await transport(settings.smtpUrl, () => (whole = true)).sendMail({
			from: settings.from,
			to: { name: '', address: content.to },
			subject: content.subject,
			text: content.text,
			...(content.html ? { html: content.html } : {}),
			...(content.icalEvent ? { icalEvent: content.icalEvent } : {}),
			messageId: mail.message_id,
			date: clock.now(),
			headers: { 'Auto-Submitted': 'auto-generated' }
		});
		return { kind: 'sent' };
	} catch (error) {
		return meaning(error as { code?: string; responseCode?: number }, whole);
	}
}

const system = (mailId: string) => systemActor(mailId);

function mark(
	mail: MailRow,
	values: {
		status: MailRow['status'];
		error?: string | null;
		sent?: boolean;
	}
) {
	const over = values.status !== 'waiting';
	return changeOwn(system(mail.id), 'mail.send', (writer) =>
		writer
			.updateTable('mail')
			.set({
				status: values.status,
				error: values.error ?? null,
				...(values.sent ? { sent_at: clock.now() } : {}),
				// The link has left the house, or never will: no copy stays behind.
				...(over ? { secret: null } : {})
			})
			.where('id', '=', mail.id)
			.execute()
	);
}

/** Takes a waiting mail for this try. A row found as 'sending' was left by a try that died: nobody knows how far it came. */
async function claim(mailId: string): Promise<MailRow | null> {
	return changeOwn(system(mailId), 'mail.send', async (writer) => {
		const mine = await writer
			.updateTable('mail')
			.set((eb) => ({ status: 'sending', attempts: eb('attempts', '+', 1), error: null }))
			.where('id', '=', mailId)
			.where('status', '=', 'waiting')
			.returningAll()
			.executeTakeFirst();
		if (mine) return mine;
		await writer
			.updateTable('mail')
			.set({
				status: 'doubtful',
				error: 'An earlier try was cut off; it may have arrived and was not sent again.',
				secret: null
			})
			.where('id', '=', mailId)
			.where('status', '=', 'sending')
			.execute();
		return null;
	});
}

/** Sends one mail at most once. Only what certainly was not handed over is tried again. */
export async function sendMail({ payload, lastTry }: Delivery<'mail'>): Promise<void> {
	const mail = await claim(payload.mailId);
	if (!mail) return;
	const make = mailContent[mail.kind];
	if (!make) {
		await mark(mail, { status: 'failed', error: 'Heddle does not know how to write this mail.' });
		throw new Error(`No content for mails of the kind ${mail.kind}`);
	}
	let content: MailContent | null;
	try {
		content = await readOwn(system(mail.id), (reader) => make(mail, reader));
	} catch (error) {
		// Nothing has left yet, so another try does no harm.
		await mark(mail, {
			status: lastTry ? 'failed' : 'waiting',
			error: 'It could not be written.'
		});
		throw error;
	}
	if (!content) return void (await mark(mail, { status: 'no address' }));
	const outcome = await hand(mail, content);
	log.info({ mail: mail.id, kind: mail.kind, outcome: outcome.kind }, 'mail');
	switch (outcome.kind) {
		case 'sent':
			return void (await mark(mail, { status: 'sent', sent: true }));
		case 'refused':
			return void (await mark(mail, { status: 'failed', error: outcome.why }));
		case 'doubtful':
			return void (await mark(mail, { status: 'doubtful', error: outcome.why }));
		case 'later':
			await mark(mail, { status: lastTry ? 'failed' : 'waiting', error: outcome.why });
			throw new MailTrouble(outcome.why);
	}
}
