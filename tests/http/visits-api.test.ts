import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { hashPassword } from '../../src/lib/server/auth/password';
import { newId } from '../../src/lib/id';
import { addDays, isoWeekday, type PlainDate } from '../../src/lib/time/dates';
import { dateInZone } from '../../src/lib/time/zones';
import { signIn, type Visitor } from '../support/people';
import { startServer, type RunningServer } from '../support/server';
import { addSubject, visitScene, type Scene, type SceneSubject } from '../support/visit-scene';

const password = 'linen warp and weft';
let server: RunningServer;
let scene: Scene;
let other: Scene;
let coordinator: Visitor;
let nurse: Visitor;
let monday: PlainDate;
let today: PlainDate;

beforeAll(async () => {
	server = await startServer();
	const passwordHash = await hashPassword(password);
	scene = await visitScene(server.database, { passwordHash });
	other = await visitScene(server.database, { code: 'LGC-2', passwordHash });
	coordinator = await signIn(server, scene.sites[0].coordinator.email, password);
	nurse = await signIn(server, scene.sites[0].nurse.email, password);
	today = dateInZone(new Date(), scene.sites[0].zone);
	monday = addDays(today, 8 - isoWeekday(today));
});
afterAll(() => server?.stop());

const fresh = (of: Scene = scene): Promise<SceneSubject> =>
	addSubject(server.database, of, {
		windows: {
			'month-6': [addDays(today, -10), today, addDays(today, 20)],
			'month-9': [addDays(today, -30), addDays(today, -20), addDays(today, -10)]
		}
	});
const path = (visitId: string | undefined, rest = '', studyId = scene.studyId) =>
	`/api/studies/${studyId}/visits/${visitId}${rest}`;
const place = () => ({
	date: monday,
	time: '09:00',
	roomId: scene.sites[0].rooms[0],
	staffId: scene.sites[0].nurse.id
});
const at = (version: number) => ({ 'if-match': `"${version}"` });
const counts = async () =>
	JSON.stringify(
		await server.database.sql(
			`select count(*) from app.appointment`,
			`select count(*) from app.contact_attempt`,
			`select count(*), max(version) from app.measurement`,
			`select sum(version), count(*) filter (where status = 'missed') from app.visit`
		)
	);

describe('versions', () => {
	test('R-34: without the version 428, with a stale one 412, and nothing is overwritten', async () => {
		const subject = await fresh();
		const url = path(subject.visits['month-6'], '/appointment');
		expect((await coordinator.send('POST', url, place())).status).toBe(428);
		expect((await coordinator.send('POST', url, place(), at(7))).status).toBe(412);
		const made = await coordinator.send('POST', url, place(), at(1));
		expect(made.status).toBe(201);
		expect(made.headers.get('etag')).toBe('"1"');
		const later = { ...place(), time: '10:00' };
		const race = await Promise.all([
			coordinator.send('PUT', url, later, at(1)),
			coordinator.send('PUT', url, { ...later, time: '11:00' }, at(1))
		]);
		expect(race.map((each) => each.status).sort()).toEqual([200, 412]);
		const told = await race.find((each) => each.status === 412)?.json();
		expect(told).toMatchObject({ code: 'STALE', status: 412 });
		const cancel = path(subject.visits['month-6'], '/appointment/cancel');
		expect((await coordinator.send('POST', cancel, { reason: 'Ill' })).status).toBe(428);
		expect((await coordinator.send('POST', cancel, { reason: 'Ill' }, at(2))).status).toBe(200);
	});

	test('a measurement kept twice at once is kept once', async () => {
		const subject = await fresh();
		const visit = subject.visits['month-6'];
		expect((await nurse.send('POST', path(visit, '/start'), {}, at(1))).status).toBe(200);
		const url = path(visit, `/measurements/${scene.measures.potassium}`);
		const put = (value: string) => nurse.send('PUT', url, { entry: { kind: 'value', value } });
		const race = await Promise.all([put('4.6'), put('4.7')]);
		expect(race.map((each) => each.status).sort()).toEqual([200, 428]);
		const change = { entry: { kind: 'value', value: '4.8' }, reason: 'Misread' };
		expect((await nurse.send('PUT', url, change, at(9))).status).toBe(412);
		expect((await nurse.send('PUT', url, change, at(1))).status).toBe(200);
	});
});

describe('bad input', () => {
	const long = 'x'.repeat(5000);
	const bad = {
		place: [
			null,
			[],
			'x',
			{},
			{ date: '2026-02-30' },
			{ date: 20260101 },
			{ date: '9999-12-31' },
			{ time: '25:00' },
			{ time: '24:00' },
			{ time: null },
			{ roomId: 'x' },
			{ roomId: newId() },
			{ staffId: newId() },
			{ staffId: 7 },
			{ outsideReason: long },
			{ outsideReason: 'a\u0000b' },
			{ outsideReason: '\ud800' },
			{ further: true }
		],
		reason: [
			null,
			{},
			{ reason: '' },
			{ reason: '   ' },
			{ reason: long },
			{ reason: 'a\u0000b' },
			{ reason: 5 }
		],
		contact: [
			{ way: 'pigeon' },
			{ outcome: null },
			{ at: 'yesterday' },
			{ at: '2999-01-01T00:00:00Z' },
			{ at: '2026-02-30T00:00:00Z' },
			{ at: '2026-02-10T00:00:00' },
			{ nextStep: long },
			{ nextStep: '\u0007' },
			{ tryAgainOn: '2026-13-01' },
			{ tryAgainOn: '1999-01-01' },
			{ by: newId() }
		],
		entry: [
			null,
			{},
			{ entry: null },
			{ entry: { kind: 'value' } },
			{ entry: { kind: 'magic', value: 1 } },
			{ entry: { kind: 'value', value: 'NaN' } },
			{ entry: { kind: 'value', value: 'Infinity' } },
			{ entry: { kind: 'value', value: 1e300 } },
			{ entry: { kind: 'value', value: -0.5 } },
			{ entry: { kind: 'value', value: '💥' } },
			{ entry: { kind: 'value', value: long } },
			{ entry: { kind: 'value', value: true } },
			{ entry: { kind: 'value', value: '4.6', unit: 'furlong' } },
			{ entry: { kind: 'readings', values: [] } },
			{ entry: { kind: 'readings', values: Array.from({ length: 50 }, () => 5) } },
			{ entry: { kind: 'not done', reason: long } },
			{ entry: { kind: 'value', value: '4.6' }, takenAt: '2999-01-01T00:00:00Z' },
			{ entry: { kind: 'value', value: '4.6' }, takenAt: '0001-01-01T00:00:00Z' },
			{ entry: { kind: 'value', value: '4.6' }, comment: long },
			{ entry: { kind: 'value', value: '4.6' }, comment: 'a\u0000b' },
			{ entry: { kind: 'value', value: '4.6' }, takenBy: newId() }
		],
		feed: [null, { siteId: 'x' }, { siteId: newId() }, { siteId: 3 }, { token: 'mine' }],
		nothing: [null, [], { version: 1 }]
	};

	test('each mutation answers 4xx with a sentence, never a fault, and writes nothing', async () => {
		const subject = await fresh();
		const open = subject.visits['month-6'];
		const passed = subject.visits['month-9'];
		const started = await fresh();
		const under = started.visits['month-6'];
		await nurse.send('POST', path(under, '/start'), {}, at(1));
		const measure = `/measurements/${scene.measures.potassium}`;
		const cases: [string, Visitor, string, string, unknown[], object][] = [
			['book', coordinator, 'POST', path(open, '/appointment'), bad.place, place()],
			['move', coordinator, 'PUT', path(open, '/appointment'), bad.place, place()],
			['cancel', coordinator, 'POST', path(open, '/appointment/cancel'), bad.reason, {}],
			['missed', coordinator, 'POST', path(passed, '/missed'), bad.reason, {}],
			[
				'contact',
				coordinator,
				'POST',
				path(passed, '/contacts'),
				bad.contact,
				{ way: 'letter', outcome: 'reached' }
			],
			['measure', nurse, 'PUT', path(under, measure), bad.entry, {}],
			['start', nurse, 'POST', path(open, '/start'), bad.nothing, {}],
			['finish', nurse, 'POST', path(under, '/finish'), bad.nothing, {}],
			['feed', nurse, 'POST', `/api/studies/${scene.studyId}/feed`, bad.feed, {}]
		];
		const before = await counts();
		for (const [name, visitor, method, url, bodies, base] of cases)
			for (const body of bodies) {
				const sent =
					body !== null && typeof body === 'object' && !Array.isArray(body) && name !== 'feed'
						? Object.keys(body).length === 0 && name === 'book'
							? {}
							: { ...base, ...body }
						: body;
				const answer = await visitor.send(method, url, JSON.stringify(sent), {
					...at(1),
					'content-type': 'application/json'
				});
				const label = `${name} ${JSON.stringify(body)?.slice(0, 80)}`;
				expect(answer.status, label).toBeGreaterThanOrEqual(400);
				expect(answer.status, label).toBeLessThan(500);
				expect(answer.headers.get('content-type'), label).toContain('application/problem+json');
				const told = await answer.json();
				expect(told.title.length, label).toBeGreaterThan(5);
			}
		for (const body of ['', '{', 'NaN', '{"reason": Infinity}'])
			expect(
				(
					await coordinator.send('POST', path(passed, '/missed'), body, {
						...at(1),
						'content-type': 'application/json'
					})
				).status
			).toBe(400);
		expect(await counts()).toBe(before);
	});

	test('another study’s and another site’s visits, measures, rooms and people are not there', async () => {
		const strange = await fresh(other);
		const away = await addSubject(server.database, scene, {
			site: scene.sites[1],
			windows: { 'month-6': [addDays(today, -10), today, addDays(today, 20)] }
		});
		for (const visit of [strange.visits['month-6'], away.visits['month-6'], newId()]) {
			for (const [visitor, method, rest, body] of [
				[coordinator, 'POST', '/appointment', place()],
				[coordinator, 'PUT', '/appointment', place()],
				[coordinator, 'POST', '/appointment/cancel', { reason: 'x' }],
				[coordinator, 'POST', '/missed', { reason: 'x' }],
				[coordinator, 'POST', '/contacts', { way: 'letter', outcome: 'reached' }],
				[nurse, 'POST', '/start', {}],
				[nurse, 'POST', '/finish', {}],
				[
					nurse,
					'PUT',
					`/measurements/${scene.measures.potassium}`,
					{ entry: { kind: 'value', value: '4.6' } }
				]
			] as const)
				expect((await visitor.send(method, path(visit, rest), body, at(1))).status, rest).toBe(404);
			for (const rest of ['', '/contacts', `/measurements/${scene.measures.potassium}/history`])
				expect((await nurse.get(path(visit, rest))).status).toBe(404);
		}
		const own = await fresh();
		const same = await counts();
		expect(
			(
				await coordinator.send(
					'POST',
					path(own.visits['month-6'], '/appointment', other.studyId),
					place(),
					at(1)
				)
			).status
		).toBe(404);
		for (const change of [
			{ roomId: other.sites[0].rooms[0] },
			{ roomId: scene.sites[1].rooms[0] },
			{ staffId: other.sites[0].nurse.id }
		])
			expect(
				(
					await coordinator.send(
						'POST',
						path(own.visits['month-6'], '/appointment'),
						{ ...place(), time: '15:00', ...change },
						at(1)
					)
				).status
			).toBe(422);
		expect(await counts()).toBe(same);
	});
});

describe('without JavaScript', () => {
	test('a visit is started and finished by plain forms, and a contact is logged', async () => {
		const subject = await fresh();
		const page = `/studies/${scene.studyId}/visits/${subject.visits['month-6']}`;
		const started = await nurse.submit(`${page}?/start`, { version: '1', __superform_id: 'start' });
		expect(started.status).toBe(303);
		const early = await nurse.submit(`${page}?/finish`, {
			version: '2',
			__superform_id: 'finish'
		});
		expect(early.status).toBe(422);
		expect(await early.text()).toContain('Still open: Serum creatinine');
		for (const [key, reason] of [
			['creatinine', 'Subject declined'],
			['systolic', 'Subject declined'],
			['diastolic', 'Subject declined'],
			['weight', 'Subject declined'],
			['potassium', 'Subject declined']
		] as const)
			expect(
				(
					await nurse.send(
						'PUT',
						path(subject.visits['month-6'], `/measurements/${scene.measures[key]}`),
						{ entry: { kind: 'not done', reason } }
					)
				).status
			).toBe(200);
		const finished = await nurse.submit(`${page}?/finish`, {
			version: '2',
			__superform_id: 'finish'
		});
		expect(finished.status).toBe(303);
		const read = await (await coordinator.get(page)).text();
		expect(read).toContain('not done: Subject declined');
		const chase = `/studies/${scene.studyId}/visits/${subject.visits['month-9']}/chase?/contact`;
		const logged = await coordinator.submit(chase, {
			__superform_id: 'contact',
			way: 'telephone',
			outcome: 'no answer',
			onDate: addDays(today, -1),
			onTime: '10:00',
			nextStep: '',
			tryAgainOn: ''
		});
		expect(logged.status).toBe(303);
	});
});
