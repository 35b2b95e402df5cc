import { execFileSync } from 'node:child_process';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { hashPassword } from '../../src/lib/server/auth/password';
import { addPerson, addRole, signIn, type Visitor } from '../support/people';
import { addBareStudy, type BareStudy } from '../support/bare-scene';
import { startServer, type CaughtMail, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
let server: RunningServer;
let study: BareStudy;
let ada: Visitor;
let adaId: string;
beforeAll(async () => {
	server = await startServer({ worker: true });
	study = await addBareStudy(server.database, 'AC-1');
	const passwordHash = await hashPassword(password);
	adaId = await addPerson(server.database, {
		email: 'ada@example.org',
		name: 'Ada Loom',
		passwordHash
	});
	await addRole(server.database, adaId, 'administrator');
	ada = await signIn(server, 'ada@example.org', password);
});
afterAll(() => server?.stop());

const linkIn = (mail: CaughtMail) =>
	/https?:\/\/\S+/.exec(mail.text)?.[0].replace(server.origin, '') ?? '';
const anonymous = (path: string, fields?: Record<string, string>) =>
	server.fetch(path, {
		method: fields ? 'POST' : 'GET',
		redirect: 'manual',
		headers: { accept: 'text/html', ...(fields ? { origin: server.origin } : {}) },
		...(fields ? { body: new URLSearchParams(fields) } : {})
	});

async function invite(email: string, name = 'Cleo Heald'): Promise<{ id: string; link: string }> {
	const answer = await ada.submit('/people?/invite', { email, name });
	expect(answer.status).toBe(303);
	const id = answer.headers.get('location')?.split('/').pop() as string;
	return { id, link: linkIn(await server.mailTo(email)) };
}

describe('an invitation', () => {
	test('arrives, survives a mail scanner, sets a password once, and is open to nobody after that', async () => {
		const { id, link } = await invite('cleo@example.org');
		for (let looks = 0; looks < 3; looks++) {
			const page = await anonymous(link);
			expect(page.status).toBe(200);
			expect(page.headers.get('referrer-policy')).toBe('no-referrer');
			expect(page.headers.get('cache-control')).toContain('no-store');
			expect(await page.text()).toContain('cleo@example.org');
		}
		const differing = await anonymous(link, { password, again: `${password}!` });
		expect(differing.status).toBe(400);
		const said = await differing.text();
		expect(said).toContain('not the same');
		expect(said).not.toContain(password);
		expect((await anonymous(link, { password: 'short', again: 'short' })).status).toBe(422);
		const set = await anonymous(link, { password, again: password });
		expect([set.status, set.headers.get('location')]).toEqual([303, '/sign-in?done=password']);
		expect((await anonymous(link)).status).toBe(410);
		expect((await anonymous(link, { password, again: password })).status).toBe(410);
		const cleo = await signIn(server, 'cleo@example.org', password);
		expect((await cleo.get('/')).status).toBe(200);
		expect((await cleo.get('/people')).status).toBe(403);
		expect(await (await ada.get(`/people/${id}`)).text()).toContain('in use');
	});

	test('neither the address nor the link stands in the logs', async () => {
		const { link } = await invite('quiet@example.org');
		await anonymous(link);
		const logs = server.logs();
		expect(logs).not.toContain(link.split('/').pop());
		expect(logs).not.toContain('quiet@example.org');
		expect(logs).toContain('/(public)/invitation/[token]');
	});

	test('that does not exist looks like one that was used', async () => {
		const answer = await anonymous('/invitation/0000000000000000000000000000000000000000000');
		expect(answer.status).toBe(410);
	});
});

describe('a forgotten password', () => {
	test('answers alike for a known and an unknown address, and mails only the known one', async () => {
		const { link } = await invite('dora@example.org', 'Dora Shed');
		await anonymous(link, { password, again: password });
		const [known, unknown] = await Promise.all(
			['dora@example.org', 'nobody@example.org'].map(async (email) => {
				const answer = await anonymous('/forgotten', { email });
				const page = await answer.text();
				return { status: answer.status, said: /border-kept[^>]*>([^<]*)</.exec(page)?.[1]?.trim() };
			})
		);
		expect(known?.said).toContain('a mail with a link is on its way');
		expect(unknown).toEqual(known);
		const mail = await server.mailTo('dora@example.org', (m) => m.text.includes('/reset/'));
		const reset = linkIn(mail);
		expect((await anonymous(reset)).status).toBe(200);
		expect(
			(
				await anonymous(reset, {
					password: 'another fine password',
					again: 'another fine password'
				})
			).status
		).toBe(303);
		expect((await signIn(server, 'dora@example.org', password, false)).refusal).not.toBeNull();
		await signIn(server, 'dora@example.org', 'another fine password');
		expect(server.mail.messages.filter((m) => m.to.includes('nobody@example.org'))).toEqual([]);
	});
});

describe('switching off and roles', () => {
	const formOn = (page: string, action: string, what: RegExp) => {
		const form = page
			.split('<form')
			.find((part) => part.includes(`action="?/${action}"`) && what.test(part));
		return Object.fromEntries(
			[...(form ?? '').matchAll(/name="(\w+)" value="([^"]*)"|value="([^"]*)" name="(\w+)"/g)].map(
				(m) => [m[1] ?? m[4], m[2] ?? m[3]]
			)
		) as Record<string, string>;
	};
	const joined = async (email: string, name: string) => {
		const { id, link } = await invite(email, name);
		await anonymous(link, { password, again: password });
		return { id, visitor: await signIn(server, email, password) };
	};

	test('R-25: a switched-off account is turned away at its next request, and its name stays on what it did', async () => {
		const { id, visitor } = await joined('ivo@example.org', 'Ivo Temple');
		expect((await visitor.get('/api/session')).status).toBe(200);
		const page = await (await ada.get(`/people/${id}`)).text();
		const off = await ada.submit(`/people/${id}?/active`, formOn(page, 'active', /version/));
		expect(off.status).toBe(200);
		expect((await visitor.get('/api/session')).status).toBe(401);
		expect((await visitor.get('/')).status).toBe(303);
		expect((await signIn(server, 'ivo@example.org', password, false)).refusal).not.toBeNull();
		const [events] = await server.database.sql(
			`select p.name from audit.event e join app.person p on p.id = e.actor where p.id = '${id}'`
		);
		expect(events?.length).toBeGreaterThan(1);
		expect(await (await ada.get(`/people/${id}`)).text()).toContain('Ivo Temple');
	});

	test('a granted role opens its study at the next request, and an ended one closes it', async () => {
		const { id, visitor } = await joined('juno@example.org', 'Juno Selvedge');
		const address = `/api/studies/${study.studyId}/audit`;
		expect((await visitor.get(address)).status).toBe(404);
		const today = new Date().toISOString().slice(0, 10);
		const granted = await ada.submit(`/people/${id}?/grant`, {
			role: 'auditor',
			studyId: study.studyId,
			siteId: '',
			validFrom: today,
			validTo: ''
		});
		expect(granted.status).toBe(200);
		expect((await visitor.get(address)).status).toBe(200);
		const page = await (await ada.get(`/people/${id}`)).text();
		const ended = await ada.submit(`/people/${id}?/end`, {
			...formOn(page, 'end', /auditor/),
			validTo: ''
		});
		expect(ended.status).toBe(200);
		expect((await visitor.get(address)).status).toBe(404);
	});

	test('a stale version, a role for oneself and a pair that may not meet are said in words and change nothing', async () => {
		const { id } = await joined('kim@example.org', 'Kim Picker');
		const stale = await ada.submit(`/people/${id}?/active`, { active: 'no', version: '77' });
		expect(stale.status).toBe(412);
		expect(await stale.text()).toContain('Nothing was overwritten');
		const fields = { studyId: study.studyId, siteId: '', validFrom: '2099-01-01', validTo: '' };
		const own = await ada.submit(`/people/${adaId}?/grant`, { ...fields, role: 'auditor' });
		expect(own.status).toBe(403);
		expect((await ada.submit(`/people/${id}?/grant`, { ...fields, role: 'nurse' })).status).toBe(
			200
		);
		const pair = await ada.submit(`/people/${id}?/grant`, { ...fields, role: 'board_member' });
		expect(pair.status).toBe(409);
		expect(await pair.text()).toContain('no role in the study team');
	});
});

describe('one’s own sessions', () => {
	test('are listed and ended one by one; signing out is a plain form', async () => {
		const { link } = await invite('lea@example.org', 'Lea Batten');
		await anonymous(link, { password, again: password });
		const [here, there] = [
			await signIn(server, 'lea@example.org', password),
			await signIn(server, 'lea@example.org', password)
		];
		const page = await (await here.get('/account')).text();
		const other = /name="sessionId" value="([^"]+)"/.exec(page)?.[1] as string;
		expect(page.match(/name="sessionId"/g)).toHaveLength(1);
		expect((await here.submit('/account?/endSession', { sessionId: other })).status).toBe(200);
		expect((await there.get('/api/session')).status).toBe(401);
		expect((await here.get('/api/session')).status).toBe(200);
		const out = await here.submit('/account?/signOut', {});
		expect([out.status, out.headers.get('location')]).toEqual([303, '/sign-in?done=out']);
		expect((await here.get('/api/session')).status).toBe(401);
	});

	test('nobody ends another person’s session', async () => {
		const { link } = await invite('max@example.org', 'Max Reed');
		await anonymous(link, { password, again: password });
		const max = await signIn(server, 'max@example.org', password);
		const [rows] = await server.database.sql(
			`select s.id from app.session s join app.person p on p.id = s.person_id where p.email = 'ada@example.org' and s.ended_at is null`
		);
		await max.submit('/account?/endSession', { sessionId: rows?.[0].id });
		expect((await ada.get('/api/session')).status).toBe(200);
	});
});

describe('the access list', () => {
	test('is a file that a spreadsheet runs nothing of, and taking it stands in the trail', async () => {
		await invite('formula@example.org', '=cmd()');
		const today = new Date().toISOString().slice(0, 10);
		const answer = await ada.get(`/people/access.csv?on=${today}`);
		expect(answer.status).toBe(200);
		expect(answer.headers.get('content-disposition')).toContain('attachment');
		const file = await answer.text();
		expect(file).toContain("'=cmd()");
		expect(file).toContain('Ada Loom');
		expect(file).toMatch(/^at,name,email,account,role/);
		const [events] = await server.database.sql(
			`select actor from audit.event where record = 'access_list'`
		);
		expect(events).toEqual([{ actor: adaId }]);
		expect((await ada.get('/people/access.csv?on=2026-02-30')).status).toBe(400);
	});
});

describe('the first administrator', () => {
	test('is made by the link that the command line prints, once', async () => {
		const fresh = await startServer();
		try {
			const command = () => {
				try {
					return execFileSync(
						process.execPath,
						[join(root, testBuild.buildDir, 'cli/admin.js'), 'setup-link'],
						{ encoding: 'utf8', stdio: 'pipe', env: environmentFor('admin', fresh.env) }
					).trim();
				} catch (error) {
					return `status ${(error as { status: number }).status}`;
				}
			};
			const link = command();
			expect(link).toMatch(/^http:\/\/127\.0\.0\.1:\d+\/set-up\/[\w-]{43}$/);
			const send = (fields?: Record<string, string>) =>
				fetch(link, {
					method: fields ? 'POST' : 'GET',
					redirect: 'manual',
					headers: { accept: 'text/html', origin: fresh.origin },
					...(fields ? { body: new URLSearchParams(fields) } : {})
				});
			expect((await send()).status).toBe(200);
			const made = await send({
				email: 'first@example.org',
				name: 'First One',
				password,
				again: password
			});
			expect(made.headers.get('location')).toBe('/sign-in?done=set-up');
			const first = await signIn(fresh, 'first@example.org', password);
			expect((await first.get('/people')).status).toBe(200);
			expect((await send()).status).toBe(410);
			expect(command()).toBe('status 1');
		} finally {
			await fresh.stop();
		}
	});
});
