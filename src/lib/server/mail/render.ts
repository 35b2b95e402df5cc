import { resolve } from 'node:path';
import { Eta } from 'eta';
import { z } from 'zod';

/**
 * Mails from the words in templates/mail. What a template may be given is listed here and nothing else gets in:
 * no name beside a study, no study, condition, arm, result or subject number.
 */

/** One line of plain text: a line break could start a heading or a false sentence of its own. */
const line = (most: number) =>
	z
		.string()
		.min(1)
		.max(most)
		.refine(
			(text) => !/[\p{Cc}\u2028\u2029]/u.test(text) && text.isWellFormed(),
			'One line of text'
		);

const link = z
	.string()
	.max(2000)
	// Looked at as it stands: reading it as a URL first would quietly drop line breaks.
	.refine((text) => /^https?:\/\/[^\s\p{Cc}]+$/u.test(text) && URL.canParse(text), 'A web address');

const account = z.strictObject({ link, expires: line(100) });
const visit = { when: line(120), place: line(300), contact: line(300) };
const minutes = z.number().int().min(1).max(1440);

const mails = {
	'account-invitation': account,
	'password-reset': account,
	'visit-invitation': z.strictObject({ ...visit, minutes }),
	'visit-moved': z.strictObject({ ...visit, minutes, before: line(120) }),
	'visit-cancelled': z.strictObject(visit),
	'report-released': z.strictObject({ link, since: line(100) }),
	unmasking: z.strictObject({ link, since: line(100) }),
	'kits-low': z.strictObject({ link, since: line(100) })
} as const;

export type MailName = keyof typeof mails;
export type MailData<Name extends MailName> = z.input<(typeof mails)[Name]>;
export const mailNames = Object.keys(mails) as MailName[];

export type RenderedMail = { subject: string; text: string; html: string };

const engines = new Map<string, { html: Eta; text: Eta }>();

function enginesFor(folder: string): { html: Eta; text: Eta } {
	let found = engines.get(folder);
	if (!found) {
		found = {
			html: new Eta({ views: folder, autoEscape: true, cache: true }),
			// Plain text has nothing to escape and keeps its line breaks.
			text: new Eta({ views: folder, autoEscape: false, autoTrim: false, cache: true })
		};
		engines.set(folder, found);
	}
	return found;
}

/** The folder of the mail templates: beside the program, or where HEDDLE_TEMPLATES says. */
export const mailFolder = (): string =>
	resolve(process.env.HEDDLE_TEMPLATES ?? 'templates', 'mail');

/** Subject and both bodies. Throws when the data are not exactly what the mail takes: that is a fault of the caller. */
export function renderMail<Name extends MailName>(
	name: Name,
	data: MailData<Name>,
	folder: string = mailFolder()
): RenderedMail {
	if (!Object.hasOwn(mails, name)) throw new RangeError(`No such mail: ${String(name)}`);
	const checked = mails[name].parse(data);
	const { html, text } = enginesFor(folder);
	const [heading = '', ...body] = text.render(`./${name}.txt.eta`, checked).split('\n');
	const subject = /^Subject: (.+)$/.exec(heading)?.[1]?.trim();
	if (!subject) throw new Error(`The template ${name}.txt.eta does not begin with its subject`);
	return {
		subject,
		text: `${body.join('\n').trim()}\n`,
		html: html.render(`./${name}.html.eta`, checked)
	};
}
