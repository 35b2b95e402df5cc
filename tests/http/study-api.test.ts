import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { hashPassword } from '../../src/lib/server/auth/password';
import { useEnvironment } from '../support/database';
import { asOwner, signIn, type Visitor } from '../support/people';
import {
	consentOn,
	enrolOne,
	makeList,
	makeScene,
	particulars,
	useAs,
	type Scene
} from '../support/scene';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
const today = new Date().toISOString().slice(0, 10);
let server: RunningServer;
let scene: Scene;
let other: Scene;
let end: () => Promise<void>;
let manager: Visitor;
let coordinator: Visitor;
let independent: Visitor;

beforeAll(async () => {
	server = await startServer();
	useEnvironment(server.database);
	end = useAs(server.database.appUrl);
	scene = await makeScene(server.database);
	await makeList(server.database, scene);
	end = useAs(server.database.appUrl);
	other = await makeScene(server.database);
	const hash = await hashPassword(password);
	await asOwner(server.database, (client) =>
		client.query(`update app.person set password_hash = $1 where kind = 'person'`, [hash])
	);
	manager = await signIn(server, scene.manager.email, password);
	coordinator = await signIn(server, scene.coordinator.email, password);
	independent = await signIn(server, scene.independent.email, password);
}, 300_000);
afterAll(async () => {
	await end?.();
	await server?.stop();
});

const at = (version: number) => ({ 'if-match': `"${version}"` });
const of = (study: string, rest: string) => `/api/studies/${study}${rest}`;
const site = () => scene.sites[0]?.id as string;
const written = async () =>
	JSON.stringify(
		await server.database.sql(
			...[
				'study',
				'site',
				'protocol_version',
				'screening',
				'consent',
				'subject',
				'contact_details',
				'study_exit',
				'visit',
				'allocation_record'
			].map(
				(table) =>
					`select count(*), md5(string_agg(t::text, '' order by t::text)) from app.${table} t`
			)
		)
	);

async function screening(): Promise<{ id: string; version: number }> {
	const made = await coordinator.send('POST', of(scene.studyId, '/screenings'), {
		siteId: site(),
		screenedOn: '2026-03-02'
	});
	expect(made.status).toBe(201);
	return (await made.json()) as { id: string; version: number };
}

test('the whole way in goes over the API: screening, consent, answers, enrolment, kit, contact, exit', async () => {
	const { id, version } = await screening();
	const path = (rest: string) => of(scene.studyId, `/screenings/${id}${rest}`);
	const consent = await coordinator.send(
		'POST',
		path('/consents'),
		consentOn(scene, scene.coordinator, '2026-03-02')
	);
	expect(consent.status).toBe(201);
	const protocol = (await (await manager.get(of(scene.studyId, '/protocol'))).json()) as {
		definition: { eligibility: { key: string; kind: string }[] };
	};
	const answers = Object.fromEntries(
		protocol.definition.eligibility.map((each) => [
			each.key,
			each.kind === 'inclusion' ? 'yes' : 'no'
		])
	);
	const kept = await coordinator.send('PUT', path('/eligibility'), { answers }, at(version));
	expect(kept.status).toBe(200);
	const enrol = { enrolledOn: '2026-03-02', ...particulars };
	expect((await coordinator.send('POST', path('/enrolment'), enrol)).status).toBe(428);
	expect((await coordinator.send('POST', path('/enrolment'), enrol, at(version))).status).toBe(412);
	const enrolled = await coordinator.send('POST', path('/enrolment'), enrol, at(version + 1));
	expect(enrolled.status).toBe(201);
	const subject = (await enrolled.json()) as { id: string; number: string };
	const own = (rest: string) => of(scene.studyId, `/subjects/${subject.id}${rest}`);
	const kit = await coordinator.send('POST', own('/randomisation'));
	expect(kit.status).toBe(201);
	const given = (await kit.json()) as { arm: string | null };
	expect(Object.keys(given).sort()).toEqual(['arm', 'kitNumber', 'version']);
	// The study is masked.
	expect(given.arm).toBeNull();
	expect((await coordinator.send('POST', own('/randomisation'))).status).toBe(409);
	const contact = { name: 'Ada Reed', email: 'ada@example.org' };
	expect((await coordinator.send('PUT', own('/contact-details'), contact, at(0))).status).toBe(200);
	const record = (await (await coordinator.get(own(''))).json()) as { items: { kind: string }[] };
	expect(record.items.map((item) => item.kind)).toEqual([
		'screening',
		'consent',
		'enrolment',
		'randomisation'
	]);
	expect(JSON.stringify(record)).not.toContain('Ada');
	const exit = await coordinator.send('POST', own('/exits'), {
		kind: 'stopped visits',
		happenedOn: today
	});
	expect(exit.status).toBe(201);
});

test('pages of subjects follow one another without a gap, sorted both ways, and stay at the site', async () => {
	const all = await scene.person('coordinator');
	for (let at = 0; at < 5; at++) await enrolOne(scene, all, scene.sites[at % 2]?.id);
	const walk = async (visitor: Visitor, query: string) => {
		const numbers: string[] = [];
		let cursor = '';
		do {
			const answer = await visitor.get(
				of(scene.studyId, `/subjects?limit=2&${query}${cursor ? `&cursor=${cursor}` : ''}`)
			);
			expect(answer.status).toBe(200);
			const page = (await answer.json()) as {
				items: { number: string }[];
				nextCursor: string | null;
			};
			numbers.push(...page.items.map((item) => item.number));
			cursor = page.nextCursor ?? '';
		} while (cursor);
		return numbers;
	};
	const [rows] = await server.database.sql(
		`select number from app.subject where study_id = '${scene.studyId}' order by number`
	);
	const everybody = (rows ?? []).map((row) => row.number as string);
	expect(await walk(manager, 'sort=number')).toEqual(everybody);
	expect(await walk(manager, 'sort=number&order=down')).toEqual([...everybody].reverse());
	expect((await walk(manager, 'sort=enrolled')).sort()).toEqual(everybody);
	expect(await walk(coordinator, 'sort=number')).toEqual(
		everybody.filter((number) => number.startsWith('01-'))
	);
	expect(await walk(manager, 'search=02-00')).toEqual(
		everybody.filter((number) => number.startsWith('02-'))
	);
	expect(await walk(manager, 'search=%25')).toEqual([]);
});

describe('what is wrong is refused with a field and a sentence, and nothing is written', () => {
	const nul = 'a\u0000b';
	const long = 'x'.repeat(20_000);
	const texts = [null, 7, [], {}, nul, long, '\u{1F9F5}'];
	const dates = [null, 7, '', '2026-02-30', '2026-13-01', '30.4.2026', '0000-00-00', nul, long];
	const ids = [null, 7, '', 'not-an-id', nul, '00000000-0000-4000-8000-000000000000'];

	type Case = [string, string, string, unknown, Record<string, string>?];
	const cases = async (): Promise<[Visitor, ...Case][]> => {
		const open = await screening();
		const subject = await enrolOne(scene, scene.coordinator, site());
		const consent = consentOn(scene, scene.coordinator, '2026-03-02');
		const study = {
			template: 'two-arm-trial',
			code: 'NEVER-1',
			name: 'Never',
			masked: true,
			training: false,
			sites: [{ name: 'Northmoor', zone: 'Europe/London' }]
		};
		const enrol = { enrolledOn: '2026-03-02', ...particulars };
		const contact = { name: 'Ada Reed' };
		const exit = { kind: 'died', happenedOn: '2026-03-02' };
		const edit = { edit: 'change', list: 'visits', key: 'baseline', set: { lengthMinutes: 30 } };
		const cells = (cell: object) => [{ edit: 'cells', cells: [cell] }];
		const blank = { code: 'NEVER-2', name: 'Never' };
		const made: [Visitor, ...Case][] = [];
		const each = (
			visitor: Visitor,
			method: string,
			path: string,
			body: Record<string, unknown>,
			field: string,
			values: unknown[],
			headers?: Record<string, string>
		) => {
			for (const value of values)
				made.push([
					visitor,
					`${path} ${field}`,
					method,
					path,
					{ ...body, [field]: value },
					headers
				]);
			const { [field]: _, ...rest } = body;
			if (field in body)
				made.push([visitor, `${path} without ${field}`, method, path, rest, headers]);
		};
		const to = (rest: string) => of(scene.studyId, rest);
		const screen = to(`/screenings/${open.id}`);
		const person = to(`/subjects/${subject.id}`);
		each(manager, 'POST', '/api/studies', study, 'code', [...texts, 'a b', "';--"]);
		each(manager, 'POST', '/api/studies', study, 'name', texts.slice(0, 6));
		each(manager, 'POST', '/api/studies', study, 'template', [...texts, '../secret', 'none-such']);
		each(manager, 'POST', '/api/studies', study, 'masked', [null, 'yes', 1]);
		each(manager, 'POST', '/api/studies', study, 'sites', [
			null,
			[],
			'x',
			[{ name: 'North', zone: 'Mars/Olympus' }],
			[{ name: '', zone: 'UTC' }],
			[{ name: nul, zone: 'UTC' }],
			Array.from({ length: 200 }, () => ({ name: 'North', zone: 'UTC' }))
		]);
		made.push([manager, 'extra field', 'POST', '/api/studies', { ...study, status: 'open' }]);
		each(manager, 'POST', '/api/studies/blank', blank, 'code', [...texts, 'a b', "';--"]);
		each(manager, 'POST', '/api/studies/blank', blank, 'name', texts.slice(0, 6));
		each(
			manager,
			'PATCH',
			to('/protocol'),
			{ edits: [edit] },
			'edits',
			[
				null,
				[],
				'x',
				[{}],
				[{ ...edit, edit: 'replace' }],
				[{ ...edit, list: 'people' }],
				[{ ...edit, key: long }],
				[{ ...edit, set: {} }],
				[{ ...edit, set: 'x' }],
				[{ ...edit, more: 1 }],
				[{ edit: 'facts', set: { format: 'other' } }],
				[{ edit: 'move', list: 'visits', key: 'baseline', to: -1 }],
				cells({ visit: 'Not a key', measure: 'egfr', on: true }),
				cells({ visit: 'baseline', measure: 'egfr', on: 'yes' }),
				Array.from({ length: 1001 }, () => edit)
			],
			at(1)
		);
		each(
			coordinator,
			'POST',
			to('/screenings'),
			{ siteId: site(), screenedOn: '2026-03-02' },
			'screenedOn',
			[...dates, '9999-01-01']
		);
		each(
			coordinator,
			'POST',
			to('/screenings'),
			{ siteId: site(), screenedOn: '2026-03-02' },
			'siteId',
			[...ids, scene.sites[1]?.id, other.sites[0]?.id]
		);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'signedOn', dates);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'signedTime', [
			null,
			'',
			'25:00',
			'9:00',
			'24:00',
			nul
		]);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'consentVersionId', [
			...ids,
			other.consentVersionId
		]);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'explainedBy', [
			...ids,
			other.coordinator.personId
		]);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'signedBy', [
			'',
			'somebody',
			null,
			nul
		]);
		each(coordinator, 'POST', `${screen}/consents`, consent, 'copyGiven', [false, null, 'yes']);
		each(
			coordinator,
			'PUT',
			`${screen}/eligibility`,
			{ answers: {} },
			'answers',
			[null, 'yes', { adult: 'maybe' }, { 'no-such': 'yes' }, { [long]: 'yes' }],
			at(1)
		);
		each(
			coordinator,
			'POST',
			`${screen}/closing`,
			{ reason: 'Far away.' },
			'reason',
			[null, '', '   ', nul, long],
			at(1)
		);
		each(coordinator, 'POST', `${screen}/enrolment`, enrol, 'enrolledOn', dates, at(1));
		each(
			coordinator,
			'POST',
			`${screen}/enrolment`,
			enrol,
			'characteristics',
			[null, { sex: nul, 'birth-date': '1961' }, { sex: {}, 'birth-date': [] }],
			at(1)
		);
		each(
			coordinator,
			'POST',
			`${screen}/enrolment`,
			enrol,
			'stratum',
			[null, 'x', { 'kidney-function': 5 }],
			at(1)
		);
		each(
			coordinator,
			'PUT',
			`${person}/contact-details`,
			contact,
			'name',
			[null, 7, '', '  ', nul, long],
			at(0)
		);
		each(
			coordinator,
			'PUT',
			`${person}/contact-details`,
			contact,
			'email',
			['nobody', 'a@b\r\nBcc: c@d.org', null, nul, long],
			at(0)
		);
		each(
			coordinator,
			'PUT',
			`${person}/contact-details`,
			contact,
			'phone',
			['call me', nul, long, null],
			at(0)
		);
		each(
			coordinator,
			'PUT',
			`${person}/contact-details`,
			contact,
			'language',
			['xx', null, 5],
			at(0)
		);
		each(coordinator, 'POST', `${person}/exits`, exit, 'kind', [...texts, 'left']);
		each(coordinator, 'POST', `${person}/exits`, exit, 'happenedOn', [
			...dates,
			'2026-03-01',
			'9999-01-01'
		]);
		each(coordinator, 'POST', `${person}/exits`, exit, 'reason', [null, 7, nul, long]);
		return made;
	};

	test('each field of each change, with wrong types, absent, too long, NUL, impossible days, foreign ids', async () => {
		const all = await cases();
		const before = await written();
		const wrong: string[] = [];
		for (const [visitor, what, method, path, body, headers] of all) {
			const answer = await visitor.send(method, path, body, headers);
			const told = (await answer.json()) as { detail?: string };
			const shown = `${what} = ${JSON.stringify(body).slice(0, 120)}: ${answer.status}`;
			if (answer.status < 400 || answer.status >= 500 || !told.detail) wrong.push(shown);
		}
		expect(all.length).toBeGreaterThan(180);
		expect(wrong).toEqual([]);
		expect(await written()).toBe(before);
	});

	test('bodies that are no JSON, of another type, too large; queries and cursors that are made up', async () => {
		const path = of(scene.studyId, '/screenings');
		const before = await written();
		expect((await coordinator.send('POST', path, '{')).status).toBe(400);
		expect(
			(await coordinator.send('POST', path, 'siteId=1', { 'content-type': 'text/plain' })).status
		).toBe(415);
		expect((await coordinator.send('POST', path, { siteId: 'x'.repeat(300_000) })).status).toBe(
			413
		);
		for (const query of [
			'cursor=zzz',
			'cursor=W10',
			'limit=0',
			'limit=1e9',
			'limit=NaN',
			'sort=arm',
			'order=sideways',
			'site=1',
			`search=${'x'.repeat(50)}`
		])
			expect((await coordinator.get(of(scene.studyId, `/subjects?${query}`))).status, query).toBe(
				400
			);
		expect(await written()).toBe(before);
	});

	test('another study’s and another site’s records answer as if they were not there', async () => {
		const there = await enrolOne(scene, scene.other, scene.sites[1]?.id);
		const elsewhere = await enrolOne(other, other.coordinator, other.sites[0]?.id);
		const before = await written();
		for (const [study, subject] of [
			[scene.studyId, there.id],
			[scene.studyId, elsewhere.id],
			[other.studyId, elsewhere.id]
		] as const) {
			const path = of(study, `/subjects/${subject}`);
			expect((await coordinator.get(path)).status).toBe(404);
			expect((await coordinator.send('POST', `${path}/randomisation`)).status).toBe(404);
			expect(
				(await coordinator.send('PUT', `${path}/contact-details`, { name: 'X' }, at(0))).status
			).toBe(404);
			expect(
				(await coordinator.send('POST', `${path}/exits`, { kind: 'died', happenedOn: today }))
					.status
			).toBe(404);
		}
		expect(await written()).toBe(before);
	});

	test('the list is not asked for twice, and only by its own role', async () => {
		const path = of(scene.studyId, '/allocation-list');
		expect((await manager.send('POST', path, {})).status).toBe(403);
		expect((await coordinator.send('POST', path, {})).status).toBe(403);
		const second = await independent.send('POST', path, {});
		expect(second.status).toBe(409);
		expect(await second.json()).toMatchObject({ code: 'LIST_EXISTS' });
	});

	test('a kit’s arm, a seed or a size of blocks is in no answer to the site, the data manager or the API’s description', async () => {
		const subject = await enrolOne(scene, scene.coordinator, site());
		await randomiseSubject(scene.coordinator, scene.studyId, subject.id);
		const [[list] = []] = await server.database.sql(
			`select seed, block_sizes from closed.allocation_list where study_id = '${scene.studyId}'`
		);
		for (const visitor of [coordinator, manager])
			for (const path of [
				of(scene.studyId, '/subjects'),
				of(scene.studyId, `/subjects/${subject.id}`),
				of(scene.studyId, '/protocol'),
				of(scene.studyId, '/allocation-list'),
				'/api/openapi.json',
				`/studies/${scene.studyId}/subjects/${subject.id}`,
				`/studies/${scene.studyId}/subjects/${subject.id}/__data.json`,
				`/studies/${scene.studyId}/allocation`,
				`/studies/${scene.studyId}/schedule`
			]) {
				const answer = await visitor.get(path);
				expect(answer.status, path).toBe(200);
				const text = await answer.text();
				expect(text, path).not.toMatch(/block.?size|arm.?key|"seed"/i);
				expect(text, path).not.toContain(list?.seed);
			}
	});
});
