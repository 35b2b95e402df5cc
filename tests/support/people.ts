import { newId } from '../../src/lib/id';
import type { Role } from '../../src/lib/domain/person/roles';
import type { FreshDatabase } from './database';
import type { RunningServer } from './server';
import pg from 'pg';

const system = '00000000-0000-7000-8000-000000000001';

/** Statements as the owner with the system as actor: for setting a scene, never for what is being tested. */
export async function asOwner<T>(
	database: FreshDatabase,
	work: (client: pg.Client) => Promise<T>
): Promise<T> {
	const client = new pg.Client({ connectionString: database.ownerUrl });
	await client.connect();
	try {
		await client.query('begin');
		await client.query(`select app.enter($1, 'system', 'test scene', '', null)`, [system]);
		const made = await work(client);
		await client.query('commit');
		return made;
	} finally {
		await client.end();
	}
}

export async function addPerson(
	database: FreshDatabase,
	person: { email: string; name: string; passwordHash?: string }
): Promise<string> {
	const id = newId();
	await asOwner(database, (client) =>
		client.query(
			'insert into app.person (id, email, name, password_hash) values ($1, $2, $3, $4)',
			[id, person.email, person.name, person.passwordHash ?? null]
		)
	);
	return id;
}

/** A grant in force from long ago, confirmed by a second made-up administrator where that is needed. */
export async function addRole(
	database: FreshDatabase,
	personId: string,
	role: Role,
	studyId: string | null = null,
	siteId: string | null = null
): Promise<string> {
	const id = newId();
	await asOwner(database, async (client) => {
		let second: string | null = null;
		if (role === 'independent_statistician' || role === 'board_member') {
			second = newId();
			await client.query(
				`insert into app.person (id, email, name) values ($1, $2, 'Second Person')`,
				[second, `${second}@example.org`]
			);
		}
		await client.query(
			`insert into app.person_role (id, person_id, role, study_id, site_id, valid_from, granted_by, confirmed_by, confirmed_at)
			values ($1, $2, $3, $4, $5, '2020-01-01', $6, $7, case when $7::uuid is null then null else now() end)`,
			[id, personId, role, studyId, siteId, system, second]
		);
	});
	return id;
}

export interface Visitor {
	/** What the sign-in page said, when it refused. */
	refusal: string | null;
	cookie: string;
	get(path: string, headers?: Record<string, string>): Promise<Response>;
	/** A JSON request as our own pages send it. */
	send(
		method: string,
		path: string,
		body?: unknown,
		headers?: Record<string, string>
	): Promise<Response>;
	/** A form as a page without JavaScript sends it. */
	submit(path: string, fields: Record<string, string | Blob>): Promise<Response>;
}

/** Signs in as the page does, and keeps the cookie. */
export async function signIn(
	server: RunningServer,
	email: string,
	password: string,
	mustSucceed = true
): Promise<Visitor> {
	const body = new URLSearchParams({ email, password, to: '/' });
	const answer = await server.fetch('/sign-in?/password', {
		method: 'POST',
		body,
		redirect: 'manual',
		headers: {
			origin: server.origin,
			'content-type': 'application/x-www-form-urlencoded',
			accept: 'text/html'
		}
	});
	const cookie = answer.headers
		.getSetCookie()
		.map((line) => line.split(';')[0] as string)
		.filter((pair) => pair.includes('session-token'))
		.join('; ');
	const page = await answer.text();
	const refusal = /border-lost[^>]*>([^<]*)</.exec(page)?.[1]?.trim() ?? null;
	if (mustSucceed && cookie === '')
		throw new Error(`Sign-in failed (${answer.status}): ${refusal}\n${server.logs()}`);
	return {
		refusal,
		cookie,
		get: (path, headers = {}) =>
			server.fetch(path, { redirect: 'manual', headers: { cookie, ...headers } }),
		send: (method, path, sent, headers = {}) =>
			server.fetch(path, {
				method,
				redirect: 'manual',
				headers: {
					cookie,
					origin: server.origin,
					...(sent === undefined ? {} : { 'content-type': 'application/json' }),
					...headers
				},
				...(sent === undefined
					? {}
					: { body: typeof sent === 'string' ? sent : JSON.stringify(sent) })
			}),
		submit: (path, fields) => {
			const form = new FormData();
			for (const [name, value] of Object.entries(fields)) form.set(name, value);
			return server.fetch(path, {
				method: 'POST',
				body: form,
				redirect: 'manual',
				headers: { cookie, origin: server.origin, accept: 'text/html' }
			});
		}
	};
}
