import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { accessOf } from '../../src/lib/server/routes';
import { expectedAccess as expected } from '../support/access';
import { crowd, type Crowd, type Things } from '../support/crowd';
import type { Visitor } from '../support/people';
import { addressOf, builtRoutes, type BuiltRoute } from '../support/routes';
import { startServer, type RunningServer } from '../support/server';

let server: RunningServer;
let people: Crowd;
let routes: BuiltRoute[];
beforeAll(async () => {
	server = await startServer();
	routes = builtRoutes();
	people = await crowd(server);
}, 300_000);
afterAll(async () => {
	await people?.close();
	await server?.stop();
});

/** What a page of Auth's own answers is not a route of ours; everything in the manifest is. */
const cells = () => routes.flatMap((route) => route.methods.map((method) => ({ route, method })));

test('every route and method of the build has a declared permission and a hand-written expectation', () => {
	const open = cells().map(({ route, method }) => ({
		cell: `${method} ${route.id}`,
		declared: accessOf(route.id, method) !== undefined,
		expected: expected[route.id]?.[method] !== undefined
	}));
	expect(open.filter((cell) => !cell.declared).map((cell) => cell.cell)).toEqual([]);
	expect(open.filter((cell) => !cell.expected).map((cell) => cell.cell)).toEqual([]);
	expect(open.length).toBeGreaterThan(60);
});

test('every expectation is about a route of the build', () => {
	const there = new Set(cells().map(({ route, method }) => `${method} ${route.id}`));
	const named = Object.entries(expected)
		.filter(([id]) => id !== '//')
		.flatMap(([id, methods]) => Object.keys(methods).map((method) => `${method} ${id}`));
	expect(named.filter((cell) => !there.has(cell))).toEqual([]);
});

/** What an address says after the question mark where it is nothing without it. */
const asking: Record<string, (things: Things) => string> = {
	'/(app)/studies/[study=id]/history': (t) => `?record=measurement&id=${t.measurement}`,
	'/api/studies/[study=id]/history': (t) => `?record=measurement&id=${t.measurement}`,
	'/(app)/people/access.csv': () => '?on=2026-01-01'
};

interface Answer {
	cell: string;
	status: number;
	location: string | null;
	requestId: string;
	body: string;
}

async function ask(
	visitor: Visitor | null,
	route: BuiltRoute,
	method: string,
	things: Things
): Promise<Answer> {
	const address = addressOf(route, (param) => things[param] ?? things.subject ?? '');
	const query = asking[route.id]?.(things) ?? '';
	const headers: Record<string, string> = {
		accept: route.page ? 'text/html' : 'application/json',
		...(visitor ? { cookie: visitor.cookie } : {}),
		...(method === 'GET' ? {} : { origin: server.origin })
	};
	const answer = await server.fetch(address + query, {
		method,
		redirect: 'manual',
		headers,
		...(route.page && method === 'POST' ? { body: new URLSearchParams({ nothing: '' }) } : {})
	});
	return {
		cell: `${method} ${route.id}`,
		status: answer.status,
		location: answer.headers.get('location'),
		requestId: answer.headers.get('x-request-id') ?? '',
		body: await answer.text()
	};
}

/** The session's own end comes last, or the rest of the walk would be done by nobody. */
const inOrder = () =>
	cells().sort(
		(a, b) =>
			Number(a.route.id === '/api/session' && a.method === 'DELETE') -
			Number(b.route.id === '/api/session' && b.method === 'DELETE')
	);
/** Once locked, everything would be refused for another reason: told by the sign-in tests. */
const walked = () => inOrder();

async function refusedByTheDoor(answers: Answer[]): Promise<Set<string>> {
	const [rows] = await server.database.sql(
		`select distinct request_id from audit.event where action = 'refused' and record not like 'session.%' and record not like 'password.%'
			and (jsonb_exists(after, 'route') or after ->> 'code' = 'NOT_PERMITTED')
			and request_id in (${answers.map((a) => `'${a.requestId}'`).join(',')})`
	);
	return new Set(rows?.map((row) => row.request_id));
}

const roles = [
	'administrator',
	'data_manager',
	'data_manager everywhere',
	'coordinator',
	'nurse',
	'pharmacist',
	'investigator',
	'monitor',
	'auditor',
	'statistician',
	'independent_statistician',
	'board_member',
	'nobody',
	'stranger'
];

function mayExpected(who: string, route: string, method: string): boolean {
	const allowed = expected[route]?.[method];
	if (allowed === 'everyone' || allowed === 'signed in') return true;
	if (!Array.isArray(allowed)) return false;
	return (
		allowed.includes(who) ||
		// A data manager of the whole installation is one in each study.
		(who === 'data_manager everywhere' && allowed.includes('data_manager'))
	);
}

/** The study has no plan, no faulty file and no released report, nobody asked for this job, no token opens anything. */
const withoutAThing = new Set([
	'GET /api/studies/[study=id]/plan',
	'GET /(app)/studies/[study=id]/import/[batch=id]/problems.csv',
	'GET /(app)/studies/[study=id]/looks/[look=id]/report.pdf',
	'GET /(app)/studies/[study=id]/board/[report=id]/report.pdf',
	'GET /api/jobs/[job=id]',
	'POST /api/jobs/[job=id]/cancel',
	'GET /calendar/[token].ics'
]);

describe('R-19: every role on every route and method', () => {
	test.each(roles)('%s', async (who) => {
		await server.database.sql('delete from app.rate_limit');
		const visitor = people.by[who] as Visitor;
		const answers: Answer[] = [];
		for (const { route, method } of walked()) {
			if (route.id === '/api/session/lock') continue;
			answers.push(await ask(visitor, route, method, people.things));
		}
		const refused = await refusedByTheDoor(answers);
		const wrong: string[] = [];
		for (const answer of answers) {
			const [method = '', id = ''] = answer.cell.split(' ');
			const may = mayExpected(who, id, method);
			const turnedAway = refused.has(answer.requestId);
			const notYet = withoutAThing.has(answer.cell);
			if (may && (turnedAway || ([401, 403].includes(answer.status) && !notYet)))
				wrong.push(`${answer.cell}: should come in, got ${answer.status}`);
			if (!may && (!turnedAway || ![403, 404].includes(answer.status)))
				wrong.push(`${answer.cell}: should be refused, got ${answer.status}`);
			if (answer.status >= 500)
				wrong.push(`${answer.cell}: ${answer.status} ${answer.body.slice(0, 200)}`);
			// A thing that is there is shown to who may see it.
			if (may && method === 'GET' && answer.status === 404 && !notYet)
				wrong.push(`${answer.cell}: is there and was not found`);
		}
		expect(wrong).toEqual([]);
		expect(answers.length).toBeGreaterThan(60);
		await people.again(who);
	});

	test('nobody signed in: only what is for everyone answers, the rest asks to sign in', async () => {
		await server.database.sql('delete from app.rate_limit');
		const wrong: string[] = [];
		for (const { route, method } of walked()) {
			const answer = await ask(null, route, method, people.things);
			const open = expected[route.id]?.[method] === 'everyone';
			const askedToSignIn =
				answer.status === 401 ||
				(answer.status === 303 && answer.location?.startsWith('/sign-in?to='));
			if (open === Boolean(askedToSignIn)) wrong.push(`${answer.cell}: ${answer.status}`);
			if (answer.status >= 500) wrong.push(`${answer.cell}: ${answer.status}`);
		}
		expect(wrong).toEqual([]);
	});

	test.each(['coordinator', 'nurse', 'pharmacist', 'investigator', 'monitor'])(
		'a %s of another site reads nothing of this one, and of another study nothing at all',
		async (role) => {
			const visitor = people.by[`${role} elsewhere`] as Visitor;
			const wrong: string[] = [];
			const siteThings = [
				'subject',
				'visit',
				'screening',
				'signature',
				'measurement',
				'appointment'
			];
			for (const { route, method } of walked()) {
				if (method !== 'GET') continue;
				const named = route.params.filter((param) => siteThings.includes(param));
				if (named.length > 0) {
					const here = await ask(visitor, route, method, people.things);
					if (![403, 404, 400].includes(here.status))
						wrong.push(`${here.cell} (site): ${here.status}`);
				}
				if (route.params.includes('study')) {
					const there = await ask(visitor, route, method, people.foreign.things);
					if (there.status !== 404) wrong.push(`${there.cell} (study): ${there.status}`);
				}
				// Own study in the address, another's thing after it.
				if (route.params.includes('study') && named.length > 0) {
					const mixed = { ...people.foreign.things, study: people.scene.studyId };
					const swapped = await ask(visitor, route, method, mixed);
					if (![403, 404, 400].includes(swapped.status))
						wrong.push(`${swapped.cell} (swapped): ${swapped.status}`);
				}
			}
			expect(wrong).toEqual([]);
		}
	);

	test('what is refused and what is not there answer alike', async () => {
		const visitor = people.by.stranger as Visitor;
		const nowhere = '01900000-0000-7000-8000-00000000abcd';
		const tell = async (study: string) => {
			const answer = await visitor.get(`/api/studies/${study}/audit`);
			const problem = (await answer.json()) as Record<string, unknown>;
			delete problem.instance;
			return { status: answer.status, problem };
		};
		expect(await tell(people.scene.studyId)).toEqual(await tell(nowhere));
	});
});
