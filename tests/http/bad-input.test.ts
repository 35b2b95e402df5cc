import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { newId } from '../../src/lib/id';
import { whoMay } from '../support/access';
import { crowd, type Crowd, type Things } from '../support/crowd';
import { OpenApi, withValue, type Operation } from '../support/openapi';
import type { Visitor } from '../support/people';
import { builtRoutes } from '../support/routes';
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

const routeIdOf = (operation: Operation) =>
	builtRoutes().find(
		(route) => !route.page && route.id.replace(/\[(\w+)(?:=\w+)?\]/g, '{$1}') === operation.path
	)?.id ?? '';

const addressOf = (operation: Operation, things: Things) =>
	operation.path.replace(/\{(\w+)\}/g, (_, name: string) => things[name] ?? newId());

/** Text or a value as JSON; `Infinity` stands for a number too large for JSON to hold. */
const json = (body: unknown) =>
	JSON.stringify(body ?? {}, (_, value) => (value === Infinity ? '@@1e999@@' : value)).replaceAll(
		'"@@1e999@@"',
		'1e999'
	);

interface Told {
	status: number;
	type: string;
	problem: { code?: string; title?: string; status?: number; errors?: Record<string, string> };
}

async function ask(
	operation: Operation,
	{
		body,
		things = people.things,
		query = '',
		raw
	}: { body?: unknown; things?: Things; query?: string; raw?: string }
): Promise<Told> {
	const visitor = people.by[whoMay(routeIdOf(operation), operation.method)] as Visitor;
	const answer = await server.fetch(addressOf(operation, things) + query, {
		method: operation.method,
		redirect: 'manual',
		headers: {
			cookie: visitor.cookie,
			origin: server.origin,
			'content-type': 'application/json',
			// A version that no row has: what should have been refused for its content changes nothing either way.
			...(operation.needsVersion ? { 'if-match': '"999999"' } : {})
		},
		...(operation.method === 'GET' ? {} : { body: raw ?? json(body) })
	});
	return {
		status: answer.status,
		type: answer.headers.get('content-type') ?? '',
		problem: (await answer.json().catch(() => ({}))) as Told['problem']
	};
}

/** Why the answer is not a proper refusal, or null. */
function notRefused(told: Told): string | null {
	if (told.status < 400 || told.status >= 500) return `${told.status}`;
	if (!told.type.startsWith('application/problem+json')) return `${told.status} ${told.type}`;
	if (!told.problem.title || told.problem.status !== told.status) return 'no problem details';
	if (/select |insert |postgres|syntax|at \w+ \(|node_modules/i.test(JSON.stringify(told.problem)))
		return `internals are told: ${JSON.stringify(told.problem).slice(0, 200)}`;
	return null;
}

const nonsense: [string, unknown][] = [
	['null', null],
	['true', true],
	['a number', 42.5],
	['a negative number', -1],
	['a huge number', 1e308],
	['a number beyond all numbers', Infinity],
	['an empty text', ''],
	['blank text', '   '],
	['an over-long text', 'x'.repeat(100_000)],
	['NUL', 'before\u0000after'],
	['emoji', '🧶🪡'],
	['a lone surrogate', '\ud800'],
	['NaN as text', 'NaN'],
	['Infinity as text', 'Infinity'],
	['a date that does not exist', '2026-02-30'],
	['a month that does not exist', '2026-13-01'],
	['a time that does not exist', '2026-06-09T25:61:00Z'],
	['a far year', '99999-01-01'],
	['no id', 'not-an-id'],
	['SQL', "'; drop table app.person; --"],
	['markup', '<script>alert(1)</script>'],
	['a list', [1, 'two', null]],
	['an object', { $ne: null, __proto__: { admin: true } }],
	['a deep object', JSON.parse('{"a":'.repeat(200) + '1' + '}'.repeat(200))]
];

const isDateField = (name: string, format?: string) =>
	format === 'date' || format === 'date-time' || /(On|Date|From|At|date)$/.test(name);

/** Values that our own rules refuse although the schema's words cannot say so. */
const beyondSchema = (field: string, format: string | undefined, what: string) =>
	what === 'NUL' ||
	(isDateField(field, format) && /date that|month that|time that|far year/.test(what));

/** The operations once the document is known; a table of one row for each would need it before it is there. */
const withBody = () => api.operations.filter((operation) => operation.body !== null);

describe('bad input to every API mutation is refused by field, and nothing is written', () => {
	test('the document names the mutations', () => {
		const described = new Set(
			api.operations.map((operation) => `${operation.method} ${operation.path}`)
		);
		const missing = builtRoutes()
			.filter((route) => route.id.startsWith('/api/'))
			.flatMap((route) =>
				route.methods
					.filter((method) => method !== 'GET')
					.map((method) => `${method} ${route.id.replace(/\[(\w+)(?:=\w+)?\]/g, '{$1}')}`)
			)
			.filter((name) => !described.has(name));
		// Unlocking answers a session that is locked, and is told apart in the sign-in tests; files come in raw.
		expect(
			missing.filter((name) => name !== 'POST /api/session/unlock' && !/imports?$/.test(name))
		).toEqual([]);
	});

	test('what is no JSON, or not an object', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		for (const operation of withBody())
			for (const raw of [
				'',
				'{',
				'NaN',
				'[]',
				'null',
				'"text"',
				'7',
				'[{}]',
				'\u0000',
				'{"a":1,}'
			]) {
				const told = await ask(operation, { raw });
				const why = notRefused(told);
				if (why) wrong.push(`${operation.name} ${JSON.stringify(raw)}: ${why}`);
			}
		expect(wrong).toEqual([]);
		expect(await contents(server.database)).toEqual(before);
	});

	test('missing fields and fields that nobody asked for', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		for (const operation of withBody()) {
			const schema = api.resolve(operation.body ?? {});
			const sample = api.sample(schema, '', people.things) as Record<string, unknown>;
			for (const field of schema.required ?? []) {
				const { [field]: left, ...rest } = sample;
				void left;
				const told = await ask(operation, { body: rest });
				const why = notRefused(told);
				if (why) wrong.push(`${operation.name} without ${field}: ${why}`);
				else if (
					told.status === 400 &&
					!Object.keys(told.problem.errors ?? {}).some((key) => key.startsWith(field))
				)
					wrong.push(`${operation.name} without ${field}: the field is not named`);
			}
			for (const extra of ['role', 'study_id', 'allocation', 'constructor']) {
				const told = await ask(operation, { body: { ...sample, [extra]: 'x' } });
				const why = notRefused(told);
				if (why) wrong.push(`${operation.name} with ${extra}: ${why}`);
			}
		}
		expect(wrong).toEqual([]);
		expect(await contents(server.database)).toEqual(before);
	});

	test('each field filled with nonsense', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		let asked = 0;
		for (const operation of withBody()) {
			const body = operation.body ?? {};
			const sample = api.sample(body, '', people.things);
			for (const { path, schema } of api.fields(body)) {
				const field = String(path.at(-1));
				const formats = api.branches(schema).map((each) => each.format);
				for (const [what, value] of nonsense) {
					if (
						api.accepts(schema, value) &&
						!(
							typeof value === 'string' &&
							formats.some((format) => beyondSchema(field, format, what))
						)
					)
						continue;
					asked++;
					const told = await ask(operation, { body: withValue(sample, path, value) });
					const why = notRefused(told);
					if (why) wrong.push(`${operation.name} ${path.join('.')} = ${what}: ${why}`);
					else if (told.status === 400 && Object.keys(told.problem.errors ?? {}).length === 0)
						wrong.push(`${operation.name} ${path.join('.')} = ${what}: no field is named`);
				}
			}
		}
		expect(wrong).toEqual([]);
		expect(asked).toBeGreaterThan(300);
		expect(await contents(server.database)).toEqual(before);
	}, 300_000);

	test('ids of another study, of another site, and of nothing', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		let asked = 0;
		for (const operation of api.operations) {
			const inPath = operation.parameters.filter((p) => p.in === 'path').map((p) => p.name);
			const sample = operation.body ? api.sample(operation.body, '', people.things) : undefined;
			const others: [string, Things][] = [
				['another study’s', people.foreign.things],
				['nothing’s', Object.fromEntries(Object.keys(people.things).map((key) => [key, newId()]))]
			];
			const siteRole = ['coordinator', 'nurse', 'investigator', 'monitor'].includes(
				whoMay(routeIdOf(operation), operation.method)
			);
			if (siteRole) others.push(['another site’s', people.otherSite]);
			for (const [whose, things] of others) {
				// Planned things belong to the study and not to a site.
				const swappable = inPath.filter(
					(name) => whose !== 'another site’s' || !['study', 'measure'].includes(name)
				);
				for (const name of swappable) {
					if (operation.path.startsWith('/api/jobs') && whose !== 'nothing’s') continue;
					asked++;
					const told = await ask(operation, {
						body: sample,
						things: { ...people.things, [name]: things[name] ?? newId() }
					});
					const why = notRefused(told);
					if (why) wrong.push(`${operation.name} with ${whose} ${name}: ${why}`);
				}
				for (const { path, schema } of operation.body ? api.fields(operation.body) : []) {
					if (!api.branches(schema).some((each) => each.format === 'uuid')) continue;
					const field = String(path.at(-1)).replace(/Id$/, '');
					if (whose === 'another site’s' && !(field in people.otherSite)) continue;
					// Somebody moves to another site: that one is asked for.
					if (whose === 'another site’s' && operation.path.endsWith('/transfers')) continue;
					asked++;
					const told = await ask(operation, {
						body: withValue(sample, path, things[field] ?? newId())
					});
					const why = notRefused(told);
					if (why) wrong.push(`${operation.name} with ${whose} ${path.join('.')}: ${why}`);
				}
			}
		}
		expect(wrong).toEqual([]);
		expect(asked).toBeGreaterThan(60);
		expect(await contents(server.database)).toEqual(before);
	});

	test('questions after the question mark', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		let asked = 0;
		for (const operation of api.operations) {
			for (const parameter of operation.parameters.filter((p) => p.in === 'query'))
				for (const [what, value] of nonsense) {
					if (typeof value !== 'string') continue;
					asked++;
					const told = await ask(operation, {
						body: {},
						query: `?${parameter.name}=${encodeURIComponent(value.toWellFormed().slice(0, 6000))}`
					});
					if (told.status >= 500)
						wrong.push(`${operation.name} ?${parameter.name}=${what}: ${told.status}`);
					if (what === 'NUL' && (told.status < 400 || told.status > 499))
						wrong.push(`${operation.name} ?${parameter.name}=NUL: ${told.status}`);
				}
		}
		expect(wrong).toEqual([]);
		expect(asked).toBeGreaterThan(20);
		expect(await contents(server.database)).toEqual(before);
	});

	test('a body that is too large', async () => {
		const before = await contents(server.database);
		const wrong: string[] = [];
		for (const operation of withBody()) {
			const told = await ask(operation, { body: { text: 'x'.repeat(400 * 1024) } });
			const why = notRefused(told);
			if (why) wrong.push(`${operation.name}: ${why}`);
		}
		expect(wrong).toEqual([]);
		expect(await contents(server.database)).toEqual(before);
	});
});

/** Forms in which every field may be left out. */
const wholeWhenEmpty = new Set([
	'/(app)/studies/[study=id]/windows?/feed',
	// Its one field begins with the usual number of days.
	'/(app)/studies/[study=id]/kits?/plan'
]);

describe('forms without scripts', () => {
	test('an empty form, a body that is no form and over-long fields never break, and what is refused wrote nothing', async () => {
		await server.database.sql('delete from app.rate_limit');
		let before = await contents(server.database);
		const wrong: string[] = [];
		let asked = 0;
		/** What the page asks for in this action's form; null when the page shows no such form now. */
		const namesIn = (page: string, action: string): string[] | null => {
			const target =
				action === 'default' ? /<form(?![^>]*action=)/ : new RegExp(`action="[^"]*\\?/${action}"`);
			const form = page
				.split(/(?=<form)/)
				.map((part) => part.split('</form>')[0] as string)
				.find((part) => target.test(part.split('>')[0] as string));
			if (!form) return null;
			return [...form.matchAll(/<(?:input|textarea|select)[^>]*\sname="([^"]+)"/g)].map(
				(m) => m[1] as string
			);
		};
		for (const route of builtRoutes())
			for (const action of route.actions) {
				const who = whoMay(route.id, 'POST');
				const path = route.id
					.replace(/\/\([^)]+\)/g, '')
					.replace(/\[(\w+)(?:=\w+)?\]/g, (_, name: string) => people.things[name] ?? '');
				const page = await (await (people.by[who] as Visitor).get(path)).text();
				const names = namesIn(page, action);
				const long = new URLSearchParams(
					[...new Set([...(names ?? []), 'version', 'name', 'reason'])].map((name) => [
						name,
						'9'.repeat(20_000)
					])
				);
				for (const [what, type, body] of [
					['empty', 'application/x-www-form-urlencoded', ''],
					['JSON', 'application/json', '{}'],
					['broken multipart', 'multipart/form-data; boundary=x', '--y'],
					['over-long', 'application/x-www-form-urlencoded', long.toString()]
				] as const) {
					asked++;
					const answer = await server.fetch(action === 'default' ? path : `${path}?/${action}`, {
						method: 'POST',
						redirect: 'manual',
						headers: {
							cookie: (people.by[who] as Visitor).cookie,
							origin: server.origin,
							accept: 'text/html',
							'content-type': type
						},
						body
					});
					const cell = `${route.id}?/${action} ${what}: ${answer.status}`;
					if (answer.status >= 500) wrong.push(cell);
					// A form that is its button alone is whole when it is empty; one with fields is not.
					const optional = wholeWhenEmpty.has(`${route.id}?/${action}`);
					if (answer.status < 400 && names !== null && names.length > 0 && !optional)
						wrong.push(cell);
					const after = await contents(server.database);
					if (answer.status >= 400 && JSON.stringify(after) !== JSON.stringify(before))
						wrong.push(`${cell}, but something was written`);
					before = after;
					if (answer.status < 400) {
						await people.again(who);
						before = await contents(server.database);
					}
				}
			}
		expect(wrong).toEqual([]);
		expect(asked).toBeGreaterThan(80);
	}, 300_000);
});
