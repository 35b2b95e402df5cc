import { readdirSync, readFileSync } from 'node:fs';
import { createHash } from 'node:crypto';
import { join } from 'node:path';
import { deflateSync } from 'node:zlib';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { hashPassword } from '../../src/lib/server/auth/password';
import { useEnvironment } from '../support/database';
import { pdfOf, pngOf, smallPdf } from '../support/files';
import { asOwner, signIn, type Visitor } from '../support/people';
import { enrolOne, makeScene, useAs, type Scene } from '../support/scene';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
const megabyte = 1024 * 1024;
let server: RunningServer;
let scene: Scene;
let end: () => Promise<void>;
let coordinator: Visitor;
let other: Visitor;
let nurse: Visitor;
let consent: string;
let subject: { id: string; number: string };

beforeAll(async () => {
	server = await startServer();
	useEnvironment(server.database);
	end = useAs(server.database.appUrl);
	scene = await makeScene(server.database);
	const hash = await hashPassword(password);
	await asOwner(server.database, (client) =>
		client.query(`update app.person set password_hash = $1 where kind = 'person'`, [hash])
	);
	const as = async (email: string) => {
		await server.database.sql('delete from app.rate_limit');
		return signIn(server, email, password);
	};
	coordinator = await as(scene.coordinator.email);
	other = await as(scene.other.email);
	nurse = await as(scene.nurse.email);
	subject = await enrolOne(scene, scene.coordinator, scene.sites[0]?.id, {
		contact: {
			name: 'Ottilie Quennell',
			email: 'ottilie@post.example',
			phone: '',
			language: 'en'
		}
	});
	const [rows] = await server.database.sql(
		`select id from app.consent where subject_id = '${subject.id}'`
	);
	consent = rows?.[0].id;
}, 300_000);
afterAll(async () => {
	await end?.();
	await server?.stop();
});

const scans = () => `/api/studies/${scene.studyId}/consents/${consent}/scans`;
const send = (
	who: Visitor,
	bytes: Buffer,
	{ type = 'application/pdf', name = 'form.pdf', reason = '' } = {}
) =>
	server.fetch(scans(), {
		method: 'POST',
		body: new Uint8Array(bytes),
		redirect: 'manual',
		headers: {
			cookie: who.cookie,
			origin: server.origin,
			'content-type': type,
			'content-disposition': `attachment; filename*=UTF-8''${encodeURIComponent(name)}`,
			...(reason ? { 'x-heddle-reason': encodeURIComponent(reason) } : {})
		}
	});
const kept = async () =>
	(
		await server.database.sql(
			`select id, kind, bytes, sha256, storage_key, superseded_reason from app.upload where consent_id = '${consent}' order by uploaded_at`
		)
	)[0] ?? [];
const stored = () => {
	try {
		return readdirSync(join(server.database.files, 'open', 'scans'));
	} catch {
		return [];
	}
};

test('what is not a whole and harmless scan is refused in words, and nothing of it is kept', async () => {
	const bomb = deflateSync(Buffer.alloc(64 * megabyte, 32)).toString('latin1');
	const bad: [Buffer, Parameters<typeof send>[2], number, RegExp][] = [
		[Buffer.alloc(0), {}, 422, /0 bytes/],
		[pngOf(2, 2), { name: 'form.pdf', type: 'application/pdf' }, 422, /PNG image/],
		[smallPdf, { name: 'form.png', type: 'image/png' }, 422, /“.png”/],
		[smallPdf, { name: 'form.pdf', type: 'image/jpeg' }, 422, /sent as image\/jpeg/],
		[Buffer.from('<html>'), {}, 422, /none of the kinds/],
		[smallPdf.subarray(0, 60), {}, 422, /cut off/],
		[
			Buffer.from('\u0000\u0000\u0000\u0018ftypheic'),
			{ name: 'a.heic', type: 'image/heic' },
			422,
			/HEIC/
		],
		[pdfOf('1 0 obj << /OpenAction << /S /JavaScript /JS (x) >> >> endobj'), {}, 422, /script/],
		[pdfOf('1 0 obj << /Names << /EmbeddedFiles 4 0 R >> >> endobj'), {}, 422, /another file/],
		[
			pdfOf(`5 0 obj << /Type /ObjStm /Filter /FlateDecode >> stream\n${bomb}\nendstream endobj`),
			{},
			422,
			/cannot be checked/
		],
		[pngOf(60_000, 60_000), { name: 'a.png', type: 'image/png' }, 422, /100 million/],
		[Buffer.concat([smallPdf, Buffer.alloc(21 * megabyte)]), {}, 413, /20 MB/]
	];
	for (const [bytes, said, status, words] of bad) {
		const answer = await send(coordinator, bytes, said);
		const told = (await answer.json()) as { title: string; errors?: { file?: string } };
		expect([words.source, answer.status]).toEqual([words.source, status]);
		expect(told.errors?.file ?? told.title).toMatch(words);
	}
	expect(await kept()).toEqual([]);
	expect(stored()).toEqual([]);
});

test('a file that does not say how large it is is given up when it is too large', async () => {
	let sent = 0;
	const endless = new ReadableStream<Uint8Array>({
		pull(controller) {
			sent += megabyte;
			if (sent > 200 * megabyte) controller.close();
			else controller.enqueue(new Uint8Array(megabyte));
		}
	});
	const answer = await server
		.fetch(scans(), {
			method: 'POST',
			body: endless,
			duplex: 'half',
			headers: {
				cookie: coordinator.cookie,
				origin: server.origin,
				'content-type': 'application/pdf'
			}
		} as RequestInit)
		// Whoever keeps sending may find the line cut before the answer is read.
		.catch(() => null);
	if (answer) expect(answer.status).toBe(413);
	expect(sent).toBeLessThan(120 * megabyte);
	expect(await kept()).toEqual([]);
});

test('a scan is kept encrypted under a name of ours, given back as it was, and replaced with a reason', async () => {
	const made = await send(coordinator, smallPdf, { name: 'Ottilie Quennell consent.pdf' });
	expect(made.status).toBe(201);
	const { id, sha256 } = (await made.json()) as { id: string; sha256: string };
	expect(sha256).toBe(createHash('sha256').update(smallPdf).digest('hex'));
	const [row] = await kept();
	const lying = readFileSync(join(server.database.files, 'open', row.storage_key));
	expect(lying.includes(Buffer.from('%PDF'))).toBe(false);

	const got = await coordinator.get(`/api/studies/${scene.studyId}/scans/${id}`);
	expect(Buffer.from(await got.arrayBuffer()).equals(smallPdf)).toBe(true);
	expect(got.headers.get('content-type')).toBe('application/pdf');
	expect(got.headers.get('content-disposition')).toMatch(
		new RegExp(`^attachment; filename="consent-${subject.number}-\\d{4}-\\d{2}-\\d{2}\\.pdf"$`)
	);
	expect(got.headers.get('x-content-type-options')).toBe('nosniff');
	expect(got.headers.get('cache-control')).toBe('no-store');

	expect((await send(coordinator, smallPdf)).status).toBe(422);
	const png = pngOf(3, 3);
	const again = { name: 'b.png', type: 'image/png' };
	expect((await send(coordinator, png, again)).status).toBe(422);
	const replaced = await send(coordinator, png, {
		...again,
		reason: 'The first was unreadable: ü'
	});
	expect(replaced.status).toBe(201);
	expect((await kept()).map((each) => [each.kind, each.superseded_reason])).toEqual([
		['pdf', 'The first was unreadable: ü'],
		['png', null]
	]);
	// The earlier one can still be read.
	expect((await coordinator.get(`/api/studies/${scene.studyId}/scans/${id}`)).status).toBe(200);
	const [events] = await server.database.sql(
		`select count(*)::int as n from audit.event where record = 'upload' and action = 'act' and subject_id = '${subject.id}'`
	);
	expect(events).toEqual([{ n: 2 }]);
	const [trail] = await server.database.sql(
		`select coalesce(after::text, '') || coalesce(before::text, '') as said from audit.event where record = 'upload'`
	);
	expect(JSON.stringify(trail)).not.toContain('Quennell');
});

test('is nobody else’s to send or to fetch', async () => {
	const [row] = await kept();
	for (const [who, status] of [
		[other, 404],
		[nurse, 403]
	] as const) {
		expect((await who.get(`/api/studies/${scene.studyId}/scans/${row.id}`)).status).toBe(status);
		expect((await send(who, smallPdf)).status).toBe(status);
	}
});

test('two scans sent at once for one consent: one stands', async () => {
	const fresh = await enrolOne(scene);
	const [rows] = await server.database.sql(
		`select id from app.consent where subject_id = '${fresh.id}'`
	);
	consent = rows?.[0].id;
	const both = await Promise.all([
		send(coordinator, smallPdf),
		send(coordinator, pdfOf('1 0 obj << >> endobj'))
	]);
	expect(both.map((answer) => answer.status).sort()).toEqual([201, 422]);
	expect(await kept()).toHaveLength(1);
});

test('without the page’s program a form does the same', async () => {
	const fresh = await enrolOne(scene);
	const [rows] = await server.database.sql(
		`select id from app.consent where subject_id = '${fresh.id}'`
	);
	consent = rows?.[0].id;
	const page = `/studies/${scene.studyId}/consents/${consent}/scan`;
	const bad = await coordinator.submit(page, {
		file: new File(['nonsense'], 'form.pdf'),
		reason: ''
	});
	expect(await bad.text()).toContain('none of the kinds');
	const good = await coordinator.submit(page, {
		file: new File([new Uint8Array(smallPdf)], 'form.pdf', { type: 'application/pdf' }),
		reason: ''
	});
	expect(await good.text()).toContain('The scan is kept.');
	expect(await kept()).toHaveLength(1);
});

test('R-81: a search by name leaves no name in addresses, logs, mails’ subjects or the trail’s acts', async () => {
	const found = await coordinator.send('POST', `/api/studies/${scene.studyId}/contact-search`, {
		name: 'quenn'
	});
	expect(found.status).toBe(200);
	expect(await found.json()).toMatchObject({
		items: [{ number: subject.number, name: 'Ottilie Quennell' }]
	});
	expect(
		(await coordinator.send('POST', `/api/studies/${scene.studyId}/contact-search`, { name: 'q' }))
			.status
	).toBe(400);
	expect(
		(await nurse.send('POST', `/api/studies/${scene.studyId}/contact-search`, { name: 'quenn' }))
			.status
	).toBe(403);
	expect(
		await (
			await other.send('POST', `/api/studies/${scene.studyId}/contact-search`, { name: 'quenn' })
		).json()
	).toEqual({ items: [], more: false });
	expect(
		(await coordinator.get(`/api/studies/${scene.studyId}/contact-search?name=quenn`)).status
	).toBe(404);
	const form = await coordinator.submit(`/studies/${scene.studyId}/subjects`, {
		name: 'quenn',
		__superform_id: 'byName'
	});
	expect(await form.text()).toContain('Ottilie Quennell');
	expect(server.logs()).not.toMatch(/quenn/i);
	const [acts] = await server.database.sql(
		`select before::text, after::text, reason from audit.event where action in ('act', 'refused')`
	);
	expect(JSON.stringify(acts)).not.toMatch(/quenn/i);
	const [facts] = await server.database.sql(`select facts::text from app.mail`);
	expect(JSON.stringify(facts)).not.toMatch(/quenn/i);
});
