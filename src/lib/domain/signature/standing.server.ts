import { sql } from 'kysely';
import type { Reader } from '$lib/server/change';
import { fingerprintNow } from '../cut/fingerprint.server';
import { findKind } from './kinds.server';
import type { Signable } from './signable';
import { brokenBy, sheetText, standingOf, type LaterChange, type Standing } from './signature';

/** Signatures as they are kept, with whether signer, meaning, instant and record are still tied to the content. */
export const keptSignatures = (reader: Reader) =>
	reader
		.selectFrom('signature as s')
		.select([
			's.id',
			's.study_id',
			's.site_id',
			's.record',
			's.record_id',
			's.meaning',
			's.statement',
			's.content',
			's.sha256',
			's.signer_id',
			's.printed_name',
			's.role',
			's.at',
			's.zone',
			sql<boolean>`s.digest = app.signature_digest(s.*)`.as('tied')
		]);

export type Kept = Awaited<
	ReturnType<ReturnType<typeof keptSignatures>['executeTakeFirstOrThrow']>
>;

export interface Judged {
	kept: Kept;
	standing: Standing;
	/** The record as it stands; null when it is gone. */
	now: Signable | null;
	/** The change that broke it, where the audit trail knows one. */
	broken: LaterChange | null;
}

/** Each signature held against its record as it stands. */
export async function judge(reader: Reader, all: readonly Kept[]): Promise<Judged[]> {
	const now = new Map<string, Signable>();
	for (const record of new Set(all.map((each) => each.record))) {
		const ids = [...new Set(all.filter((e) => e.record === record).map((e) => e.record_id))];
		for (const each of (await findKind(record)?.find(reader, ids)) ?? [])
			now.set(`${record} ${each.recordId}`, each);
	}
	const judged: Judged[] = [];
	for (const kept of all) {
		const there = now.get(`${kept.record} ${kept.record_id}`) ?? null;
		const standing = standingOf(
			{ ...kept, recordId: kept.record_id },
			fingerprintNow,
			there && sheetText(there.sheet)
		);
		judged.push({
			kept,
			standing,
			now: there,
			broken: standing === 'broken' ? await whatBroke(reader, kept) : null
		});
	}
	return judged;
}

/** The change since which the record has said something else than was signed. */
async function whatBroke(reader: Reader, kept: Kept): Promise<LaterChange | null> {
	const made = await reader
		.selectFrom('audit.event')
		.select('id')
		.where('record', '=', 'signature')
		.where('record_id', '=', kept.id)
		.where('action', '=', 'create')
		.executeTakeFirst();
	if (!made) return null;
	const changes = await findKind(kept.record)?.changesAfter(reader, kept.record_id, made.id);
	return brokenBy(changes ?? []);
}

/** The signatures of these records, the oldest first, each held against its record. */
export async function judgedOf(
	reader: Reader,
	record: string,
	recordIds: readonly string[]
): Promise<Judged[]> {
	if (recordIds.length === 0) return [];
	const kept = await keptSignatures(reader)
		.where('s.record', '=', record)
		.where('s.record_id', 'in', recordIds)
		.orderBy('s.id')
		.execute();
	return judge(reader, kept);
}
