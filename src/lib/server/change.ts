import { sql, type Kysely, type QueryExecutorProvider, type Transaction } from 'kysely';
import { Refusal } from '$lib/refusal';
import { clock } from '$lib/time/clock';
import type { Actor } from './actor';
import { database } from './db/db';
import { translated } from './db/errors';
import type { Tables } from './db/tables';
import { enqueue, type EnqueueOptions, type QueueName, type QueuePayloads } from './jobs/queue';
import { roleAllowing, type Capability, type Scope } from './permission';

/** All that loads and reads receive; the transaction behind it is read-only in the database too. */
export type Reader = Pick<Kysely<Tables>, 'selectFrom' | 'fn' | 'dynamic'> & QueryExecutorProvider;

/** Exists only inside change(). */
export interface Writer extends Reader, Pick<Kysely<Tables>, 'insertInto' | 'updateTable'> {
	/** Sent with the transaction: if it rolls back, there is no job. */
	enqueue<Q extends QueueName>(
		queue: Q,
		payload: QueuePayloads[Q],
		options?: EnqueueOptions
	): Promise<void>;
}

interface ChangeOptions {
	/** Why; where a saved value changes the database insists on it. */
	reason?: string;
}

async function enter(on: Transaction<Tables>, actor: Actor, role: string, reason: string) {
	const told = clock.moved ? clock.now().toISOString() : null;
	await sql`select app.enter(${actor.personId}::uuid, ${role}, ${actor.requestId}, ${reason}, ${told})`.execute(
		on
	);
}

/** What change() hands out: the transaction's reading and writing, without its power to begin or end others. */
function writing(on: Transaction<Tables>): Writer {
	return {
		selectFrom: on.selectFrom.bind(on) as Writer['selectFrom'],
		insertInto: on.insertInto.bind(on),
		updateTable: on.updateTable.bind(on) as Writer['updateTable'],
		fn: on.fn,
		dynamic: on.dynamic,
		getExecutor: () => on.getExecutor(),
		enqueue: (queue, payload, options) => enqueue(on, queue, payload, options)
	};
}

const roleFor = (actor: Actor, capability: Capability, scope: Scope): string | null =>
	actor.system ? 'system' : roleAllowing(actor.grants, capability, scope);

/** Records an attempt that was turned away, in a transaction of its own: the attempt's own one is gone. */
export async function recordRefusal(
	actor: Actor,
	what: string,
	scope: Scope,
	detail: Record<string, unknown>
): Promise<void> {
	await database()
		.kysely.transaction()
		.execute(async (on) => {
			await enter(on, actor, 'none', '');
			await sql`select audit.refuse(${what}, ${scope.studyId ?? null}::uuid, ${scope.siteId ?? null}::uuid, ${JSON.stringify(detail)}::jsonb)`.execute(
				on
			);
		});
}

async function refusedAtTheDoor(actor: Actor, capability: Capability, scope: Scope) {
	const refusal = new Refusal('NOT_PERMITTED');
	await recordRefusal(actor, capability, scope, { code: refusal.code });
	return refusal;
}

/**
 * The one door for every change: permission, transaction, actor, audit (the triggers'), jobs. Whatever throws inside
 * rolls everything back.
 */
export async function change<T>(
	actor: Actor,
	capability: Capability,
	scope: Scope,
	work: (writer: Writer) => Promise<T>,
	options: ChangeOptions = {}
): Promise<T> {
	const role = roleFor(actor, capability, scope);
	if (role === null) throw await refusedAtTheDoor(actor, capability, scope);
	return act(actor, role, capability, scope, work, options);
}

/** A change to what is one's own (a password, a session, a feed): no role is needed, an account is. */
export const changeOwn = <T>(
	actor: Actor,
	what: string,
	work: (writer: Writer) => Promise<T>
): Promise<T> => act(actor, actor.system ? 'system' : 'own', what, {}, work, {});

async function act<T>(
	actor: Actor,
	role: string,
	what: string,
	scope: Scope,
	work: (writer: Writer) => Promise<T>,
	options: ChangeOptions
): Promise<T> {
	try {
		return await database()
			.kysely.transaction()
			.execute(async (on) => {
				await enter(on, actor, role, options.reason?.trim() ?? '');
				const writer = writing(on);
				return work(writer);
			});
	} catch (error) {
		const refused = translated(error);
		if (refused instanceof Refusal && refused.status === 403)
			await recordRefusal(actor, what, scope, { code: refused.code });
		throw refused;
	}
}

/** The door's read-only twin. */
export async function read<T>(
	actor: Actor,
	capability: Capability,
	scope: Scope,
	work: (reader: Reader) => Promise<T>
): Promise<T> {
	const role = roleFor(actor, capability, scope);
	if (role === null) throw await refusedAtTheDoor(actor, capability, scope);
	return look(actor, role, work);
}

export const readOwn = <T>(actor: Actor, work: (reader: Reader) => Promise<T>): Promise<T> =>
	look(actor, actor.system ? 'system' : 'own', work);

async function look<T>(
	actor: Actor,
	role: string,
	work: (reader: Reader) => Promise<T>
): Promise<T> {
	try {
		return await database()
			.kysely.transaction()
			.setIsolationLevel('repeatable read')
			.setAccessMode('read only')
			.execute(async (on) => {
				await enter(on, actor, role, '');
				return work(on);
			});
	} catch (error) {
		throw translated(error);
	}
}

/** For an update that must meet the version it was based on: refuses a stale one, finds out when the row is gone. */
export function mustHaveChanged(changed: readonly unknown[]): void {
	if (changed.length === 0) throw new Refusal('STALE');
}
