import { readdirSync, readFileSync } from 'node:fs';
import ICAL from 'ical.js';
// @ts-expect-error jsdom brings no types
import { JSDOM } from 'jsdom';
import { simpleParser } from 'mailparser';
import { createTransport } from 'nodemailer';
import { describe, expect, it } from 'vitest';
import {
	contentType,
	feed,
	invitation,
	mailPart,
	type CalendarFile
} from '../../domain/calendar/calendar';
import { newRandomId } from '../../id';
import { mailFolder, mailNames, renderMail, type MailData, type MailName } from './render';

const link = 'https://desk.example.org/set/abc?x=1&y=2';
const expires = 'Tue 9 June 2026, 09:30 Europe/Berlin (+02:00)';
const visit = { when: expires, place: 'Room 1, First site', contact: 'desk@example.org' };
const good: { [Name in MailName]: MailData<Name> } = {
	'account-invitation': { link, expires },
	'password-reset': { link, expires },
	'visit-invitation': { ...visit, minutes: 30 },
	'visit-moved': { ...visit, minutes: 30, before: 'Mon 8 June 2026, 09:30 Europe/Berlin (+02:00)' },
	'visit-cancelled': visit,
	'report-released': { link, since: expires },
	unmasking: { link, since: expires },
	'kits-low': { link, since: expires }
};

const pageOf = (html: string): Document => new JSDOM(html).window.document;

/** What must never stand in a mail, given under every name a caller might use by mistake. */
const secrets = {
	study: 'AMR-01',
	studyName: 'Kidney function decline',
	condition: 'chronic kidney disease',
	arm: 'Treatment A',
	kit: 'K48213-6',
	subject: '02-0017-0',
	subjectNumber: '02-0017-0',
	personName: 'Anna Weaver',
	result: 'eGFR 41'
};

const hostile = '<script>alert(1)</script><img src=x onerror=alert(2)>"\'&{{7*7}}<%= it %>${7*7}';

function calendarFor(name: MailName): CalendarFile | null {
	if (!name.startsWith('visit-')) return null;
	const made = invitation({
		uid: newRandomId(),
		sequence: name === 'visit-invitation' ? 0 : 1,
		method: name === 'visit-cancelled' ? 'CANCEL' : 'REQUEST',
		start: new Date('2026-06-09T07:30:00Z'),
		end: new Date('2026-06-09T08:00:00Z'),
		now: new Date('2026-06-01T12:00:00Z'),
		place: 'Room 1, First site',
		organiser: { name: 'Visit desk', email: 'desk@example.org' },
		attendee: { email: 'person@example.org' }
	});
	if (!made.ok) throw new Error(made.problem.message);
	return made.value;
}

async function sent<Name extends MailName>(name: Name, data: MailData<Name>): Promise<Buffer> {
	const calendar = calendarFor(name);
	const part = calendar && mailPart(calendar);
	const info = await createTransport({ streamTransport: true, buffer: true }).sendMail({
		from: '"Visit desk" <desk@example.org>',
		to: 'person@example.org',
		...renderMail(name, data),
		...(part ? { icalEvent: part } : {})
	});
	return info.message as Buffer;
}

describe('mails', () => {
	it.each(mailNames)('%s has a subject, a text and a page that say the same', (name) => {
		const mail = renderMail(name, good[name]);
		const page = pageOf(mail.html);
		expect(page.querySelector('h1')?.textContent).toBe(mail.subject);
		expect(page.documentElement.lang).toBe('en');
		const words = (text: string) => text.replace(/\s+/g, ' ');
		for (const value of Object.values(good[name]).map(String)) {
			expect(words(mail.text), value).toContain(value);
			expect(words(page.body.textContent ?? ''), value).toContain(value);
		}
		for (const text of [mail.subject, mail.text, mail.html])
			expect(text).not.toMatch(/undefined|\[object|<%|%>|it\./);
		expect(mail.text).not.toMatch(/^Subject:/m);
		if ('link' in good[name]) expect(page.querySelector('a')?.href).toBe(link);
	});

	it('every template in the folder is one of them', () => {
		const files = readdirSync(mailFolder()).filter((file) => file !== 'layout.html.eta');
		expect(files.sort()).toEqual(
			mailNames.flatMap((name) => [`${name}.html.eta`, `${name}.txt.eta`]).sort()
		);
	});

	it.each(mailNames)(
		'R-80: %s, whole and as sent, holds nothing of study, condition, arm, result, subject or name',
		async (name) => {
			// The template is given nothing but what it lists: anything more is refused before a word is written.
			for (const [key, value] of Object.entries(secrets))
				expect(() => renderMail(name, { ...good[name], [key]: value } as never), key).toThrow();

			const raw = await sent(name, good[name]);
			const mail = await simpleParser(raw);
			const all = [
				raw.toString('utf8'),
				mail.headerLines.map((header) => header.line).join('\n'),
				mail.subject,
				mail.text,
				mail.html || '',
				...mail.attachments.flatMap((each) => [each.filename ?? '', each.content.toString('utf8')])
			].join('\n');
			for (const secret of Object.values(secrets)) expect(all, secret).not.toContain(secret);
			// Nor do the words themselves tell what kind of visit it is.
			const words = [mail.subject, mail.text, mail.html || ''].join('\n').replace(/<[^>]+>/g, ' ');
			expect(words).not.toMatch(
				/\b(study|trial|research|clinic|hospital|doctor|nurse|patient|subject|participant|treatment|medicine|drug|dose|disease|condition|health|medical|kidney|blood|test result|sample|consent|arm|randomi[sz])/i
			);
			expect(mail.attachments.length).toBeGreaterThanOrEqual(name.startsWith('visit-') ? 1 : 0);
		}
	);

	it.each(mailNames)('R-80: hostile data in %s stay data', (name) => {
		const given: Record<string, unknown> = { ...good[name] };
		for (const key of Object.keys(given))
			if (key !== 'link' && key !== 'minutes') given[key] = hostile.slice(0, 100);
		const mail = renderMail(name, given as never);
		const page = pageOf(mail.html);
		expect(page.querySelectorAll('script, img, iframe, form')).toHaveLength(0);
		expect(mail.html).not.toContain('<script');
		expect(page.body.textContent).toContain(hostile.slice(0, 100));
		expect(mail.text).toContain(hostile.slice(0, 100));
		expect(mail.text).not.toContain('49');
		expect(mail.subject).toBe(renderMail(name, good[name]).subject);
	});

	it('refuses line breaks, other kinds of link, and what is missing', () => {
		for (const place of [
			'a\r\nBcc: x@example.org',
			'a\nb',
			'a\u2028b',
			'a\u0000',
			'',
			'x'.repeat(301)
		])
			expect(
				() => renderMail('visit-cancelled', { ...visit, place }),
				JSON.stringify(place)
			).toThrow();
		for (const wrong of [
			'javascript:alert(1)',
			'data:text/html,x',
			'/set',
			'https://x.example/ a',
			'https://x.example/\r\na'
		])
			expect(() => renderMail('password-reset', { link: wrong, expires }), wrong).toThrow();
		expect(() => renderMail('visit-invitation', visit as never)).toThrow();
		expect(() => renderMail('../../etc/passwd' as never, {} as never)).toThrow(RangeError);
		expect(() => renderMail('toString' as never, {} as never)).toThrow(RangeError);
	});

	it('R-86: in mail and feed, METHOD equals the MIME parameter or is absent, and DTSTAMP, VERSION and PRODID are there', async () => {
		const read = (text: string) => {
			const calendar = new ICAL.Component(ICAL.parse(text) as never);
			const stamp = calendar.getFirstSubcomponent('vevent')?.getFirstPropertyValue('dtstamp');
			expect(calendar.getFirstPropertyValue('version')).toBe('2.0');
			expect(calendar.getFirstPropertyValue('prodid')).toBe('-//Heddle//Visits//EN');
			expect((stamp as InstanceType<typeof ICAL.Time>).zone).toBe(ICAL.Timezone.utcTimezone);
			return calendar.getFirstPropertyValue('method');
		};
		for (const name of ['visit-invitation', 'visit-moved', 'visit-cancelled'] as const) {
			const raw = (await sent(name, good[name] as never)).toString('utf8');
			const type = /^Content-Type: text\/calendar;[^]*?method=(\w+)/im.exec(raw)?.[1];
			const mail = await simpleParser(raw);
			const file = mail.attachments.find((each) => /calendar|ics/.test(each.contentType));
			const method = read(file?.content.toString('utf8') ?? '');
			expect(method).toBe(name === 'visit-cancelled' ? 'CANCEL' : 'REQUEST');
			expect(type).toBe(method);
		}
		const made = feed(
			[
				{
					uid: newRandomId(),
					sequence: 0,
					start: new Date(0),
					end: new Date(60_000),
					changed: new Date(0)
				}
			],
			{ now: new Date(0) }
		);
		if (!made.ok) throw new Error(made.problem.message);
		expect(read(made.value.text)).toBeNull();
		expect(contentType(made.value)).not.toContain('method');
	});

	it('templates fetch nothing from elsewhere', () => {
		for (const file of readdirSync(mailFolder()))
			expect(readFileSync(`${mailFolder()}/${file}`, 'utf8'), file).not.toMatch(
				/https?:|src=|url\(|@import|<link/
			);
	});
});
