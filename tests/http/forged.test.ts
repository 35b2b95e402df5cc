import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { expectedAccess, whoMay } from '../support/access';
import { crowd, type Crowd } from '../support/crowd';
import { OpenApi, type Operation } from '../support/openapi';
import type { Visitor } from '../support/people';
import { addressOf, builtRoutes } from '../support/routes';
import { startServer, type RunningServer } from '../support/server';
import { contents } from '../support/unchanged';

let server: RunningServer;
let people: Crowd;
let api: OpenApi;
beforeAll(async () => {
	server = await startServer();
	people = await crowd(server);
	const told = await (people.by.administrator as Visitor).get('/api/openapi.json');
	api = new OpenApi((await told.json()) as never);
}, 300_000);
afterAll(async () => {
	await people?.close();
	await server?.stop();
});

interface Mutation {
	name: string;
	routeId: string;
	method: string;
	address: string;
	form: boolean;
}

/** Every form action and every API method that may change something. */
const mutations = (): Mutation[] =>
	builtRoutes().flatMap((route): Mutation[] => {
		const address = addressOf(route, (param) => people.things[param] ?? '');
		if (route.page)
			return route.actions.map((action) => ({
				name: `${route.id}?/${action}`,
				routeId: route.id,
				method: 'POST',
				address: action === 'default' ? address : `${address}?/${action}`,
				form: true
			}));
		return route.methods
			.filter((method) => !['GET', 'HEAD', 'OPTIONS'].includes(method))
			.map((method) => ({
				name: `${method} ${route.id}`,
				routeId: route.id,
				method,
				address,
				form: false
			}));
	});

const send = (mutation: Mutation, headers: Record<string, string>, encoding = 'form') =>
	server.fetch(mutation.address, {
		method: mutation.method,
		redirect: 'manual',
		headers: {
			...(mutation.form
				? {
						accept: 'text/html',
						'content-type': encoding === 'form' ? 'application/x-www-form-urlencoded' : 'text/plain'
					}
				: { accept: 'application/json', 'content-type': 'application/json', 'if-match': '"1"' }),
			...headers
		},
		body: mutation.form ? 'version=1&active=no&sessionId=x' : '{}'
	});

/** Sends each mutation in the given way, and expects it refused and nothing written. */
async function allRefused(
	statuses: number[],
	ask: (mutation: Mutation) => Promise<Response>,
	which: (mutation: Mutation) => boolean = () => true
): Promise<void> {
	await server.database.sql('delete from app.rate_limit');
	const before = await contents(server.database);
	const wrong: string[] = [];
	const asked = mutations().filter(which);
	for (const mutation of asked) {
		const answer = await ask(mutation);
		if (!statuses.includes(answer.status)) wrong.push(`${mutation.name}: ${answer.status}`);
	}
	expect(wrong).toEqual([]);
	expect(asked.length).toBeGreaterThan(20);
	expect(await contents(server.database)).toEqual(before);
}

const cookieOf = (mutation: Mutation) =>
	(people.by[whoMay(mutation.routeId, mutation.method)] as Visitor).cookie;
const notForEveryone = (mutation: Mutation) =>
	expectedAccess[mutation.routeId]?.[mutation.method] !== 'everyone';

describe('every mutation, by somebody who may do it', () => {
	test.each([
		['another site', 'https://elsewhere.example'],
		['another port of this host', 'http://127.0.0.1:1'],
		['nowhere (an opaque origin)', 'null']
	])('is not carried out when it comes from %s', async (_, origin) => {
		await allRefused([403], (mutation) =>
			send(mutation, { cookie: cookieOf(mutation), origin, 'sec-fetch-site': 'cross-site' })
		);
	});

	test('is not carried out when it does not say where it comes from', async () => {
		await allRefused([403], (mutation) => send(mutation, { cookie: cookieOf(mutation) }));
	});

	test('is not carried out when a form is disguised as plain text', async () => {
		await allRefused(
			[403],
			(mutation) =>
				send(
					mutation,
					{ cookie: cookieOf(mutation), origin: 'https://elsewhere.example' },
					'plain'
				),
			(mutation) => mutation.form
		);
	});

	test('is not carried out when the method is smuggled in', async () => {
		await allRefused([400, 403, 404, 405, 415], (mutation) =>
			server.fetch(`${mutation.address.split('?')[0]}?_method=${mutation.method}`, {
				method: 'POST',
				redirect: 'manual',
				headers: {
					cookie: cookieOf(mutation),
					origin: 'https://elsewhere.example',
					'x-http-method-override': mutation.method,
					'content-type': 'text/plain'
				},
				body: '{}'
			})
		);
	});
});

describe('every mutation that is not for everyone', () => {
	test('is refused without signing in', async () => {
		await allRefused(
			[401],
			(mutation) => send(mutation, { origin: server.origin }),
			notForEveryone
		);
	});

	test('is refused with a session that has ended, and with a cookie made up', async () => {
		const ended = new Map<string, string>();
		for (const who of new Set(
			mutations()
				.filter(notForEveryone)
				.map((m) => whoMay(m.routeId, m.method))
		)) {
			const visitor = await people.again(who);
			ended.set(who, visitor.cookie);
			expect((await visitor.send('DELETE', '/api/session')).status).toBe(200);
		}
		const endedCookie = (m: Mutation) => ended.get(whoMay(m.routeId, m.method)) as string;
		await allRefused(
			[401],
			(m) => send(m, { cookie: endedCookie(m), origin: server.origin }),
			notForEveryone
		);
		await allRefused(
			[401],
			(m) => send(m, { cookie: endedCookie(m).replace(/.{6}$/, 'AAAAAA'), origin: server.origin }),
			notForEveryone
		);
		for (const who of ended.keys()) await people.again(who);
	});
});

describe('R-34: what changes a version', () => {
	const routeIdOf = (operation: Operation) =>
		builtRoutes().find(
			(route) => !route.page && route.id.replace(/\[(\w+)(?:=\w+)?\]/g, '{$1}') === operation.path
		)?.id ?? '';
	const request = (operation: Operation, ifMatch: string | null) => {
		const address = operation.path.replace(
			/\{(\w+)\}/g,
			(_, name: string) => people.things[name] ?? ''
		);
		const visitor = people.by[whoMay(routeIdOf(operation), operation.method)] as Visitor;
		return visitor.send(
			operation.method,
			address,
			operation.body ? api.sample(operation.body, '', people.things) : undefined,
			ifMatch === null ? {} : { 'if-match': ifMatch }
		);
	};
	const versioned = () => api.operations.filter((operation) => operation.needsVersion);

	test('is refused without If-Match (428) and with one that names no version (412), and nothing is written', async () => {
		expect(versioned().length).toBeGreaterThan(8);
		const before = await contents(server.database);
		const wrong: string[] = [];
		for (const operation of versioned()) {
			const without = await request(operation, null);
			if (without.status !== 428) wrong.push(`${operation.name} without: ${without.status}`);
			for (const given of ['*', 'W/"1"', '"x"', '1', '"1", "2"', '""']) {
				const answer = await request(operation, given);
				if (answer.status !== 412) wrong.push(`${operation.name} ${given}: ${answer.status}`);
			}
		}
		expect(wrong).toEqual([]);
		expect(await contents(server.database)).toEqual(before);
	});

	test('never overwrites when the version is stale', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		for (const operation of versioned()) {
			const answer = await request(operation, '"999999"');
			// What the sample's own content breaks may be said first; it is never carried out.
			if (answer.status < 400 || answer.status >= 500)
				wrong.push(`${operation.name}: ${answer.status}`);
		}
		expect(wrong).toEqual([]);
		expect(await contents(server.database)).toEqual(before);
	});
});
