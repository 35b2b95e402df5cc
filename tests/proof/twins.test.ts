import { readFileSync, readdirSync } from 'node:fs';
import { join } from 'node:path';
import { setTimeout as wait } from 'node:timers/promises';
import { afterAll, beforeAll, expect, test, vi } from 'vitest';
import { build } from '../../scripts/lib/build.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { hashPassword } from '../../src/lib/server/auth/password';
import { addDays } from '../../src/lib/time/dates';
import { dateInZone } from '../../src/lib/time/zones';
import { freshDatabase, type FreshDatabase } from '../support/database';
import { signIn, type Visitor } from '../support/people';
import { startServer, type RunningServer } from '../support/server';
import { levelled, parting } from './support/level';
import { playTwin, type Twin } from './support/twin';
import { addressesOf, fillings, questions, readingRoutes } from './support/walk';

// Both twins draw their list from one seed; only the places' arms differ afterwards.
vi.mock('../../src/lib/domain/randomisation/generator.server', async (original) => ({
	...(await original<object>()),
	newSeed: () => '5eed'.repeat(16)
}));

const password = 'linen warp and weft';
/** Those who may never tell one arm from the other. */
const masked = [
	'administrator',
	'data manager',
	'coordinator',
	'nurse',
	'investigator',
	'monitor',
	'auditor',
	'statistician',
	'board member'
];

/** Pages that show the protocol, where the arms are named. */
const protocolShown = [
	'/api/studies/[study=id]/protocol/changes',
	'/(app)/studies/[study=id]/schedule/definition.json',
	'/(app)/studies/[study=id]/schedule',
	'/(app)/studies/[study=id]/allocation',
	'/(app)/studies/[study=id]/audit',
	'/(app)/studies/[study=id]/audit/export.csv',
	'/api/studies/[study=id]/audit',
	'/api/studies/[study=id]/protocol'
];

interface Side {
	db: FreshDatabase;
	twin: Twin;
	server: RunningServer;
	visitors: Record<string, Visitor>;
}
let sides: [Side, Side];
let since: number;

beforeAll(async () => {
	await build({ ...testBuild, say: () => {} });
	// A second of grace: databases keep microseconds, this keeps milliseconds.
	since = Date.now() - 1000;
	const told = {
		passwordHash: await hashPassword(password),
		password,
		begin: addDays(dateInZone(new Date(), 'UTC'), -150)
	};
	const played: [FreshDatabase, Twin][] = [];
	for (const swapped of [false, true]) {
		const db = await freshDatabase();
		played.push([db, await playTwin(db, { ...told, swapped })]);
	}
	const servers = await Promise.all(played.map(([db]) => startServer({ database: db })));
	// Sign-ins are told to the minute on some pages: both twins' lie in the same one.
	if (new Date().getSeconds() > 20) await wait((61 - new Date().getSeconds()) * 1000);
	sides = (await Promise.all(
		played.map(async ([db, twin], at): Promise<Side> => {
			const server = servers[at] as RunningServer;
			const visitors: Record<string, Visitor> = {};
			for (const [name, { email }] of Object.entries(twin.people))
				visitors[name] = await signIn(server, email, password);
			return { db, twin, server, visitors };
		})
	)) as [Side, Side];
}, 900_000);

afterAll(async () => {
	for (const side of sides ?? []) {
		await side.server.stop();
		await side.db.drop();
	}
});

const both = async <T>(work: (side: Side) => Promise<T>): Promise<[T, T]> =>
	(await Promise.all(sides.map(work))) as [T, T];

test('the twins are what they should be: the same kits at the same places, every arm the other one', async () => {
	const [a, b] = await both(
		async ({ db }) =>
			(
				await db.sql(
					`select id, stratum, position, kit_number, subject_id, arm_key from closed.list_position order by id`
				)
			)[0] ?? []
	);
	expect(a.length).toBeGreaterThan(100);
	expect(a.filter((row) => row.subject_id !== null)).toHaveLength(14);
	const other: Record<string, string> = { a: 'b', b: 'a' };
	expect(b).toEqual(a.map((row) => ({ ...row, arm_key: other[row.arm_key as string] })));
	const [one, two] = await both(
		async ({ db, twin }) =>
			(
				await db.sql(`select result from closed.look_result where look_id = '${twin.byArmLookId}'`)
			)[0]?.[0].result
	);
	expect(one.growth).toBeDefined();
	expect(JSON.stringify(one)).not.toBe(JSON.stringify(two));
});

test('what the independent statistician reads of the look by arm differs, so a difference would be seen', async () => {
	const [a, b] = await both(async ({ visitors, twin, server }) => {
		const answer = await (visitors['independent statistician'] as Visitor).get(
			`/api/studies/${twin.studyId}/looks/${twin.byArmLookId}`
		);
		return {
			status: answer.status,
			text: levelled(await answer.text(), { origin: server.origin, since })
		};
	});
	expect(a.status).toBe(200);
	expect(b.status).toBe(200);
	expect(a.text).not.toBe(b.text);
});

test('R-42: no page, answer, feed, export or file that a masked person can fetch differs between the twins in a byte', async () => {
	const routes = readingRoutes(sides[0].db);
	const filling = await fillings(sides[0].db, sides[0].twin);
	const asked = await questions(sides[0].db);
	expect(routes.length).toBeGreaterThan(40);
	const differences: string[] = [];
	const compared: Record<string, Record<number, number>> = {};
	let bytes = 0;

	async function fetched(side: Side, name: string, address: string) {
		const answer = await (side.visitors[name] as Visitor).get(address);
		const body = Buffer.from(await answer.arrayBuffer());
		const type = answer.headers.get('content-type') ?? '';
		const level = (text: string) => levelled(text, { origin: side.server.origin, since });
		const headers = [...answer.headers.entries()].filter(
			([header]) =>
				![
					'date',
					// The page's hash before anything was levelled; the page itself is compared.
					...(type.startsWith('text/html') ? ['etag'] : []),
					'x-request-id',
					'set-cookie',
					'content-length',
					'connection',
					'keep-alive'
				].includes(header)
		);
		return {
			status: answer.status,
			size: body.length,
			type,
			text:
				level(JSON.stringify(headers)) +
				'\n' +
				(/pdf|octet/.test(type) ? body.toString('latin1') : level(body.toString('utf8')))
		};
	}
	async function compare(routeId: string, name: string, address: string): Promise<string> {
		// Once more where a minute passed between the two: a real difference stays.
		for (let tries = 0; ; tries++) {
			const [a, b] = await both((side) => fetched(side, name, address));
			if (a.text === b.text && a.status === b.status) {
				bytes += a.size;
				const row = (compared[`${routeId} as ${name}`] ??= {});
				row[a.status] = (row[a.status] ?? 0) + 1;
				return a.text;
			}
			if (tries === 2) {
				differences.push(
					`${name}: ${address} (${a.status}, ${b.status}) ${parting(a.text, b.text)}`
				);
				return '';
			}
		}
	}

	// What only the closed side knows stands in no answer; the arms' names only where the protocol itself is shown.
	// Both studies' lists come from one seed here, so a number may be unused in one and given in the other.
	const [unused = []] = await sides[0].db.sql(
		`select kit_number from closed.list_position p where not exists (select from app.kit k where k.kit_number = p.kit_number)
			and not exists (select from app.subject s where s.kit_number = p.kit_number)`
	);
	const unusedKits = new Set(unused.map((row) => row.kit_number as string));
	const namingArms = new Set<string>();
	const told: string[] = [];
	function search(routeId: string, name: string, text: string): void {
		if (/Treatment [AB]\b/.test(text)) namingArms.add(routeId);
		if (text.includes('5eed5eed')) told.push(`${routeId} as ${name}: the seed`);
		for (const [kit] of text.matchAll(/K\d{5,9}-\d/g))
			if (unusedKits.has(kit)) told.push(`${routeId} as ${name}: unused kit ${kit}`);
	}

	for (const route of routes) {
		const addresses = addressesOf(route, filling);
		expect(addresses, `nothing to put into ${route.id}`).not.toEqual([]);
		const more = (asked[route.id] ?? []).flatMap((query) =>
			addresses
				.filter((address) => !address.endsWith('__data.json'))
				.slice(0, 6)
				.map((address) => `${address}${query}`)
		);
		for (const name of masked)
			for (const address of [...addresses, ...more]) {
				const text = await compare(route.id, name, address);
				search(route.id, name, text);
				const next = /"nextCursor":"([^"]+)"/.exec(text)?.[1];
				if (next && !route.page && address.includes('limit='))
					await compare(route.id, name, `${address}&cursor=${encodeURIComponent(next)}`);
			}
	}
	const tally = Object.values(compared).reduce<Record<number, number>>((all, row) => {
		for (const [status, n] of Object.entries(row))
			all[Number(status)] = (all[Number(status)] ?? 0) + n;
		return all;
	}, {});
	console.log(
		`Twins: ${routes.length} routes × ${masked.length} roles, ${Object.values(tally).reduce((a, b) => a + b, 0)} answers compared ` +
			`(${Object.entries(tally)
				.map(([status, n]) => `${n} × ${status}`)
				.join(', ')}), ${(bytes / 1e6).toFixed(1)} MB\n` +
			routes
				.map(
					({ id }) =>
						`  ${id}: ${masked.map((name) => `${name} ${JSON.stringify(compared[`${id} as ${name}`] ?? {})}`).join('; ')}`
				)
				.join('\n')
	);
	expect(differences.slice(0, 12).join('\n'), `${differences.length} differences`).toBe('');
	expect(unusedKits.size).toBeGreaterThan(100);
	expect(told).toEqual([]);
	expect([...namingArms].filter((id) => !protocolShown.includes(id))).toEqual([]);
	// Whatever somebody may see must have been seen; sheets with arms on them are for nobody masked.
	const unseen = routes.filter(
		({ id }) =>
			!id.startsWith('/(app)/studies/[study=id]/codes') &&
			!masked.some((name) => compared[`${id} as ${name}`]?.[200])
	);
	expect(unseen.map(({ id }) => id)).toEqual([]);
	expect(tally[500]).toBeUndefined();
});

test('the open report and every released open copy are the same file in both', async () => {
	const [a, b] = await both(async ({ db }) =>
		readdirSync(join(db.files, 'open'), { recursive: true, withFileTypes: true })
			.filter((entry) => entry.isFile())
			.map((entry) => join(entry.parentPath, entry.name))
			.sort()
			.map((file) => {
				const name = file.slice(db.files.length);
				const bytes = readFileSync(file);
				// A scan lies there as ciphertext, new each time; what is served of it is compared above.
				return [name, name.startsWith('/open/scans/') ? bytes.length : bytes.toString('base64')];
			})
	);
	expect(a.filter(([name]) => String(name).endsWith('.pdf')).length).toBe(3);
	expect(b).toEqual(a);
});

test('the files of the closed area have the same names and sizes in both', async () => {
	const [a, b] = await both(async ({ db }) =>
		readdirSync(join(db.files, 'closed'), { recursive: true, withFileTypes: true })
			.filter((entry) => entry.isFile())
			.map((entry) => join(entry.parentPath, entry.name))
			.sort()
			.map((file) => [file.slice(db.files.length), readFileSync(file).length])
	);
	expect(a.length).toBe(3);
	expect(b).toEqual(a);
});

test('whatever the application may read in the database is the same in both', async () => {
	const [tables = []] = await sides[0].db.sql(
		`select table_schema || '.' || table_name as name from information_schema.role_table_grants
		where grantee = 'heddle_app' and privilege_type = 'SELECT' and table_schema in ('app', 'audit')
			and table_name not in ('session', 'rate_limit', 'seal') order by 1`
	);
	expect(tables.length).toBeGreaterThan(25);
	const differences: string[] = [];
	for (const { name } of tables as { name: string }[]) {
		// Random by design: the key-wrapped link of a mail. By the wall clock: when a row of the trail was written, and its digest.
		const but =
			name === 'audit.event'
				? ` - 'wall_at' - 'xid' - 'digest'`
				: name === 'app.mail'
					? ` - 'secret'`
					: '';
		const where =
			name === 'audit.event'
				? `where request_id not in (select request_id from audit.event where record in ('session'))
					and coalesce(after ->> 'open_to', before ->> 'open_to') is null`
				: // What tells the arm is there for the pharmacist, and hidden from whoever is masked.
					name === 'app.measurement'
					? 'where open_to is null'
					: '';
		const [a, b] = await both(async ({ db, server }) =>
			(
				(
					await db.sql(`select (to_jsonb(t)${but})::text as row from ${name} t ${where} order by 1`)
				)[0] ?? []
			).map((row) => levelled(row.row as string, { origin: server.origin, since }))
		);
		a.sort();
		b.sort();
		for (const [at, row] of a.entries())
			if (row !== b[at]) {
				differences.push(`${name} ${parting(row, b[at] ?? '')}`);
				break;
			}
		if (a.length !== b.length) differences.push(`${name}: ${a.length} and ${b.length} rows`);
	}
	expect(differences.join('\n')).toBe('');
});
