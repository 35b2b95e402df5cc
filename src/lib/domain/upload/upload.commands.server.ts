import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, read, type Writer } from '$lib/server/change';
import { unwrapBytes, wrapBytes } from '$lib/server/secret';
import { sha256Of, storage } from '$lib/server/storage/storage';
import { clock } from '$lib/time/clock';
import { dateInZone } from '$lib/time/zones';
import { checkScan } from './check-scan.server';
import { scanTypes, type ScanKind } from './scan';
import { scanReason, type ScanOutput } from './upload.input';

const scopeOfConsent = (actor: Actor, studyId: string, consentId: string) =>
	read(actor, 'consent.scan', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('consent as c')
			.leftJoin('subject as s', 's.id', 'c.subject_id')
			.select((e) => e.fn.coalesce('s.site_id', 'c.site_id').as('site_id'))
			.where('c.study_id', '=', studyId)
			.where('c.id', '=', consentId)
			.executeTakeFirst();
		if (!row?.site_id) throw new Refusal('NOT_FOUND');
		return { studyId, siteId: row.site_id };
	});

/** Whether this person may hand in a scan of this consent: asked before any of the file is read. */
export const maySendScan = (actor: Actor, studyId: string, consentId: string) =>
	scopeOfConsent(actor, studyId, consentId).then((scope) =>
		read(actor, 'consent.scan', scope, async () => scope)
	);

async function current(writer: Writer, consentId: string) {
	return writer
		.selectFrom('upload')
		.select(['id', 'sha256'])
		.where('consent_id', '=', consentId)
		.where('superseded_at', 'is', null)
		.forUpdate()
		.executeTakeFirst();
}

/**
 * Keeps the scan of a signed consent: checked by its content, encrypted, under a name of our own. A scan that is replaced
 * stays, marked with the reason. The name it was sent under is looked at and not kept: it may name somebody.
 */
export async function keepScan(
	actor: Actor,
	studyId: string,
	consentId: string,
	file: { bytes: Buffer; name: string | null; type: string | null; reason: string }
): Promise<ScanOutput> {
	const scope = await maySendScan(actor, studyId, consentId);
	const why = scanReason.safeParse(file.reason);
	if (!why.success)
		throw new Refusal('INVALID', {}, { reason: why.error.issues[0]?.message ?? '' });
	const checked = checkScan(file.bytes, file);
	if (!checked.ok) throw new Refusal('RULE', { why: checked.why }, { file: checked.why });
	const id = newId();
	const key = `scans/${id}`;
	const sha256 = sha256Of(file.bytes);
	let stored = false;
	return change(
		actor,
		'consent.scan',
		scope,
		async (writer) => {
			const consent = await writer
				.selectFrom('consent')
				.select(['id', 'site_id', 'subject_id'])
				.where('study_id', '=', studyId)
				.where('id', '=', consentId)
				.executeTakeFirst();
			if (!consent) throw new Refusal('NOT_FOUND');
			// One at a time for a consent, or two that are sent at once would both be the first.
			await sql`select pg_advisory_xact_lock(hashtextextended(${`scan:${consentId}`}, 0))`.execute(
				writer
			);
			const before = await current(writer, consentId);
			if (before && why.data === '')
				throw new Refusal(
					'RULE',
					{ why: 'There is a scan already. Say why it is replaced: the earlier one is kept.' },
					{ reason: 'Say why the scan is replaced.' }
				);
			if (before?.sha256 === sha256)
				throw new Refusal('CONFLICT', { what: 'This very file is there already.' });
			// The file first: a row never names a file that is not there.
			if (!stored) {
				await (await storage()).put(key, wrapBytes(file.bytes), 'application/octet-stream');
				stored = true;
			}
			if (before)
				await writer
					.updateTable('upload')
					.set({ superseded_at: clock.now(), superseded_reason: why.data })
					.where('id', '=', before.id)
					.execute();
			const made = await writer
				.insertInto('upload')
				.values({
					id,
					study_id: studyId,
					site_id: scope.siteId,
					subject_id: consent.subject_id,
					consent_id: consentId,
					kind: checked.kind,
					bytes: file.bytes.length,
					sha256,
					storage_key: key,
					uploaded_by: actor.personId
				})
				.returning('version')
				.executeTakeFirstOrThrow();
			return { id, version: made.version, kind: checked.kind, bytes: file.bytes.length, sha256 };
		},
		{ reason: why.data }
	);
}

/** One scan as it was sent, for somebody who may see it; the reading stands in the trail. */
export async function openScan(
	actor: Actor,
	studyId: string,
	uploadId: string
): Promise<{ bytes: Buffer; name: string; type: string }> {
	const consentId = await read(actor, 'consent.scan', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('upload')
			.select('consent_id')
			.where('study_id', '=', studyId)
			.where('id', '=', uploadId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return row.consent_id;
	});
	const scope = await scopeOfConsent(actor, studyId, consentId);
	const row = await change(actor, 'consent.scan', scope, async (writer) => {
		const found = await writer
			.selectFrom('upload as u')
			.leftJoin('subject as s', 's.id', 'u.subject_id')
			.innerJoin('site as t', 't.id', 'u.site_id')
			.select([
				'u.kind',
				'u.storage_key',
				'u.sha256',
				'u.uploaded_at',
				'u.subject_id',
				's.number',
				't.zone'
			])
			.where('u.id', '=', uploadId)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		await sql`select audit.act('upload', ${uploadId}, ${studyId}::uuid, ${scope.siteId}::uuid, ${found.subject_id}::uuid, '{"opened": true}')`.execute(
			writer
		);
		return found;
	});
	const bytes = unwrapBytes(await (await storage()).get(row.storage_key));
	if (sha256Of(bytes) !== row.sha256) throw new Error(`The stored scan ${uploadId} is damaged.`);
	const kind = scanTypes[row.kind as ScanKind];
	return {
		bytes,
		type: kind.type,
		name: `consent-${row.number ?? 'screening'}-${dateInZone(row.uploaded_at, row.zone)}.${kind.extensions[0]}`
	};
}
