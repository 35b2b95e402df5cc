import { sql } from 'kysely';
import { newId } from '$lib/id';
import { systemActor } from '../actor';
import { changeOwn } from '../change';

/** Seals what the audit trail has grown by; how many events that were. */
export async function sealNow(): Promise<number> {
	const { rows } = await changeOwn(systemActor(newId()), 'audit.seal', (writer) =>
		sql<{ sealed: string }>`select audit.seal_now() as sealed`.execute(writer)
	);
	return Number(rows[0]?.sealed ?? 0);
}

export async function sealTrail(): Promise<void> {
	await sealNow();
}
