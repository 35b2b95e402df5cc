import { afterAll, beforeAll, beforeEach, expect, test } from 'vitest';
import {
	addScreening,
	answerEligibility
} from '../../src/lib/domain/subject/screening.commands.server';
import { hashPassword } from '../../src/lib/server/auth/password';
import { useEnvironment } from '../support/database';
import { asOwner, signIn, type Visitor } from '../support/people';
import { makeScene, metAnswers, useAs, type Scene } from '../support/scene';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
let server: RunningServer;
let scene: Scene;
let end: () => Promise<void>;
let investigator: Visitor;
let coordinator: Visitor;

beforeAll(async () => {
	server = await startServer();
	useEnvironment(server.database);
	end = useAs(server.database.appUrl);
	scene = await makeScene(server.database);
	const hash = await hashPassword(password);
	await asOwner(server.database, (client) =>
		client.query(`update app.person set password_hash = $1 where kind = 'person'`, [hash])
	);
	investigator = await signIn(server, scene.investigator.email, password);
	coordinator = await signIn(server, scene.coordinator.email, password);
}, 300_000);
beforeEach(() => server.database.sql('delete from app.rate_limit'));
afterAll(async () => {
	await end?.();
	await server?.stop();
});

const of = (rest: string) => `/api/studies/${scene.studyId}/signatures${rest}`;
const met = () => metAnswers(scene);

async function answered(): Promise<{ id: string; version: number }> {
	const made = await addScreening(scene.coordinator, scene.studyId, {
		siteId: scene.sites[0]?.id as string,
		screenedOn: '2026-03-02'
	});
	const answers = await met();
	const { version } = await answerEligibility(
		scene.coordinator,
		scene.studyId,
		made.id,
		{ answers },
		made.version
	);
	return { id: made.id, version };
}

interface Waiting {
	needs: string;
	items: { record: string; recordId: string; meaning: string; sha256: string }[];
}
const waiting = async () => (await (await investigator.get(of('/waiting'))).json()) as Waiting;
const itemOf = async (id: string) => {
	const found = (await waiting()).items.find((item) => item.recordId === id);
	return (
		found &&
		(({ record, recordId, meaning, sha256 }) => ({ record, recordId, meaning, sha256 }))(found)
	);
};

test('a record is signed by its hash, shown with name, meaning and zone, and broken by a later change', async () => {
	const screening = await answered();
	expect((await waiting()).needs).toBe('address and password');
	const item = await itemOf(screening.id);
	const bare = await investigator.send('POST', of(''), { items: [item], password });
	expect(bare.status).toBe(400);
	expect(await bare.json()).toMatchObject({ errors: { email: expect.any(String) } });
	const made = await investigator.send('POST', of(''), {
		items: [item],
		email: scene.investigator.email,
		password
	});
	expect(made.status).toBe(201);
	const { signatures } = (await made.json()) as { signatures: { id: string }[] };
	const id = signatures[0]?.id as string;
	expect((await waiting()).needs).toBe('password');

	const told = await coordinator.get(of(`/${id}`));
	expect(told.status).toBe(200);
	expect(await told.json()).toMatchObject({
		name: scene.investigator.name,
		role: 'site investigator',
		meaning: 'I have checked the eligibility of this person and confirm it.',
		at: expect.stringMatching(/T\d\d:\d\d:\d\d(\.\d+)?[+-]\d\d:\d\d$/),
		when: expect.stringContaining('Europe/London'),
		standing: 'stands',
		sha256: item?.sha256
	});
	const [key = ''] = Object.keys(await met());
	const changed = await coordinator.send(
		'PUT',
		`/api/studies/${scene.studyId}/screenings/${screening.id}/eligibility`,
		{ answers: { ...(await met()), [key]: 'no' } },
		{ 'if-match': `"${screening.version}"` }
	);
	expect(changed.status).toBe(200);
	const record = await coordinator.get(`/api/studies/${scene.studyId}/screenings/${screening.id}`);
	expect(await record.json()).toMatchObject({
		signatures: [{ id, standing: 'broken', broken: { by: scene.coordinator.name } }]
	});
});

test('what was not shown as it stands is refused with problem details, and nothing is signed', async () => {
	const screening = await answered();
	const item = await itemOf(screening.id);
	const count = async () =>
		(await server.database.sql('select count(*)::int as n from app.signature'))[0]?.[0].n;
	const before = await count();
	const post = (body: object) =>
		investigator.send('POST', of(''), { email: scene.investigator.email, password, ...body });
	for (const [body, status, code] of [
		[{ items: [{ ...item, sha256: '0'.repeat(64) }] }, 409, 'SHOWN_CHANGED'],
		[{ items: [{ ...item, meaning: 'approval' }] }, 422, 'NOT_SIGNABLE'],
		[{ items: [{ ...item, recordId: scene.studyId }] }, 404, 'NOT_FOUND'],
		[{ items: [item, item] }, 400, 'INVALID'],
		[{ items: [] }, 400, 'INVALID'],
		[{ items: [{ ...item, record: 'visit' }] }, 400, 'INVALID'],
		[{ items: [item], password: 'wrong' }, 422, 'SIGNING_SECRET'],
		[{ items: [item], signer: scene.manager.personId }, 400, 'INVALID'],
		[{ items: [item], at: '2001-01-01T00:00:00Z' }, 400, 'INVALID']
	] as const) {
		const answer = await post(body);
		expect(answer.headers.get('content-type')).toContain('application/problem+json');
		expect({ status: answer.status, ...((await answer.json()) as object) }).toMatchObject({
			status,
			code
		});
	}
	expect(await count()).toBe(before);
});

test('a locked screen signs nothing, and unlocking it asks for the address again', async () => {
	const screening = await answered();
	const item = await itemOf(screening.id);
	expect((await investigator.send('POST', '/api/session/lock', {})).status).toBe(200);
	const secrets = { email: scene.investigator.email, password };
	expect((await investigator.send('POST', of(''), { items: [item], ...secrets })).status).toBe(423);
	expect((await investigator.send('POST', '/api/session/unlock', { password })).status).toBe(200);
	expect((await waiting()).needs).toBe('address and password');
	expect((await investigator.send('POST', of(''), { items: [item], password })).status).toBe(400);
	expect((await investigator.send('POST', of(''), { items: [item], ...secrets })).status).toBe(201);
});
