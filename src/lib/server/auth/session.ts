import { sql } from 'kysely';
import { newId } from '$lib/id';
import type { Grant, Role } from '$lib/domain/person/roles';
import type { Actor } from '../actor';
import { changeOwn, recordRefusal } from '../change';
import { config } from '../config';
import { database } from '../db/db';
import { systemActor } from '../actor';
import { passwordFits } from './password';
import { countTry, forgiveTries } from './throttle';

/** A working day; after it everybody signs in again, however busy (R-24's absolute limit). */
export const sessionHours = 12;

export interface LiveSession {
	id: string;
	locked: boolean;
	/** Left of the absolute limit. */
	endsAt: Date;
	actor: Actor;
}

/** The session's row with its person and the grants in force; null when it has ended in any way. One statement. */
export async function findSession(
	sessionId: string,
	requestId: string,
	now: Date
): Promise<LiveSession | null> {
	const { rows } = await sql<{
		id: string;
		started_at: Date;
		seen_at: Date;
		locked_at: Date | null;
		person_id: string;
		name: string;
		email: string;
		grants: { role: Role; studyId: string | null; siteId: string | null }[];
	}>`
		select s.id, s.started_at, s.seen_at, s.locked_at, p.id as person_id, p.name, p.email,
			coalesce((select jsonb_agg(jsonb_build_object('role', r.role, 'studyId', r.study_id, 'siteId', r.site_id) order by r.granted_at, r.id)
				from app.person_role r where r.person_id = p.id and app.in_force(r, (app.now() at time zone 'UTC')::date)), '[]') as grants
		from app.session s join app.person p on p.id = s.person_id
		where s.id = ${sessionId}::uuid and s.ended_at is null and p.active
	`.execute(database().kysely);
	const row = rows[0];
	if (!row) return null;
	const endsAt = new Date(row.started_at.getTime() + sessionHours * 3_600_000);
	if (endsAt <= now) return null;
	const idle = now.getTime() - row.seen_at.getTime() > config().idleMinutes * 60_000;
	return {
		id: row.id,
		locked: row.locked_at !== null || idle,
		endsAt,
		actor: {
			personId: row.person_id,
			name: row.name,
			email: row.email,
			sessionId: row.id,
			requestId,
			grants: row.grants satisfies Grant[],
			system: false
		}
	};
}

/** Notes that the person is there; once a minute is enough for a limit of minutes. */
export async function noteSeen(sessionId: string): Promise<void> {
	await sql`update app.session set seen_at = clock_timestamp()
		where id = ${sessionId}::uuid and seen_at < clock_timestamp() - interval '30 seconds'`.execute(
		database().kysely
	);
}

export async function lockSession(actor: Actor): Promise<void> {
	await changeOwn(actor, 'session.lock', (writer) =>
		writer
			.updateTable('session')
			.set({ locked_at: new Date() })
			.where('id', '=', actor.sessionId)
			.where('locked_at', 'is', null)
			.execute()
	);
}

/** The same person's password opens the locked screen; anything else is counted and recorded. */
export async function unlockSession(actor: Actor, password: string): Promise<boolean> {
	await countTry('account', actor.email);
	const row = await database()
		.kysely.selectFrom('person')
		.select('password_hash')
		.where('id', '=', actor.personId)
		.executeTakeFirst();
	if (!(await passwordFits(row?.password_hash ?? null, password))) {
		await recordRefusal(actor, 'session.unlock', {}, { code: 'WRONG_PASSWORD' });
		return false;
	}
	await forgiveTries('account', actor.email);
	await changeOwn(actor, 'session.unlock', (writer) =>
		writer
			.updateTable('session')
			// A break: the next signature asks for the address again.
			.set({ locked_at: null, seen_at: new Date(), signing_since: null })
			.where('id', '=', actor.sessionId)
			.execute()
	);
	return true;
}

export async function startSession(
	person: { id: string; name: string; email: string },
	method: 'password' | 'sso',
	device: string,
	requestId: string
): Promise<string> {
	const id = newId();
	const actor: Actor = {
		personId: person.id,
		name: person.name,
		email: person.email,
		sessionId: id,
		requestId,
		grants: [],
		system: false
	};
	await changeOwn(actor, 'session.start', (writer) =>
		writer
			.insertInto('session')
			.values({ id, person_id: person.id, method, device: device.slice(0, 200) })
			.execute()
	);
	return id;
}

export async function endSession(actor: Actor, sessionId: string): Promise<void> {
	await changeOwn(actor, 'session.end', (writer) =>
		writer
			.updateTable('session')
			.set({ ended_at: new Date() })
			.where('id', '=', sessionId)
			.where('person_id', '=', actor.personId)
			.where('ended_at', 'is', null)
			.execute()
	);
}

/** The account for a password sign-in, or null: the same answer, after the same work, for whatever is wrong. */
export async function personForPassword(
	email: string,
	password: string,
	requestId: string
): Promise<{ id: string; name: string; email: string } | null> {
	const address = email.trim().toLowerCase();
	await countTry('account', address);
	const person = await database()
		.kysely.selectFrom('person')
		.select(['id', 'name', 'email', 'password_hash'])
		.where('email', '=', address)
		.where('active', '=', true)
		.where('kind', '=', 'person')
		.executeTakeFirst();
	if (!(await passwordFits(person?.password_hash ?? null, password)) || !person) {
		await recordRefusal(
			systemActor(requestId),
			'session.start',
			{},
			{ code: 'WRONG_PASSWORD', person: person?.id ?? null }
		);
		return null;
	}
	await forgiveTries('account', address);
	return person;
}

export const personForSso = (email: string) =>
	database()
		.kysely.selectFrom('person')
		.select(['id', 'name', 'email'])
		.where('email', '=', email.trim().toLowerCase())
		.where('active', '=', true)
		.where('kind', '=', 'person')
		.executeTakeFirst();
