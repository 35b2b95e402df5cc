import { Refusal } from '$lib/refusal';
import { roleNames } from '../person/roles';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may, sitesAllowing } from '$lib/server/permission';
import { signingNeeds } from '$lib/server/auth/signing';
import { instantText, isoWithOffset } from '$lib/time/zones';
import { fingerprintNow } from '../cut/fingerprint.server';
import { signableKinds } from './kinds.server';
import { judge, judgedOf, keptSignatures, type Judged } from './standing.server';
import {
	differencesOf,
	meanings,
	meaningsOf,
	readSheet,
	recordKinds,
	sheetText,
	type RecordKind
} from './signature';
import type { SignatureDetail, SignatureView, WaitingToSign } from './signature.input';
import { mostAtOnce } from './signature.input';

const roleName = (role: string) => (roleNames as Record<string, string>)[role] ?? role;

/** A signature as every screen shows it: printed name, role, meaning, date and time with the zone, and whether it stands. */
export function viewOf({ kept, standing, broken }: Judged): SignatureView {
	return {
		id: kept.id,
		record: kept.record as RecordKind,
		recordId: kept.record_id,
		name: kept.printed_name,
		role: roleName(kept.role),
		meaning: kept.statement,
		at: isoWithOffset(kept.at, kept.zone),
		when: instantText(kept.at, kept.zone),
		standing,
		broken: broken && {
			at: isoWithOffset(broken.at, kept.zone),
			when: instantText(broken.at, kept.zone),
			by: broken.by
		},
		sha256: kept.sha256
	};
}

/** Within a read: the signatures of one record, the newest first. */
export const signaturesOf = async (
	reader: Reader,
	record: RecordKind,
	recordId: string
): Promise<SignatureView[]> =>
	(await judgedOf(reader, record, [recordId])).map(viewOf).toReversed();

/** One signature with the content that was signed and what stands otherwise now. */
export const getSignature = (
	actor: Actor,
	studyId: string,
	signatureId: string
): Promise<SignatureDetail> =>
	read(actor, 'signature.read', { studyId }, async (reader) => {
		const kept = await keptSignatures(reader)
			.where('s.study_id', '=', studyId)
			.where('s.id', '=', signatureId)
			.executeTakeFirst();
		if (!kept || !may(actor.grants, 'signature.read', { studyId, siteId: kept.site_id }))
			throw new Refusal('NOT_FOUND');
		const [judged] = await judge(reader, [kept]);
		if (!judged) throw new Refusal('NOT_FOUND');
		const signed = readSheet(kept.content);
		return {
			...viewOf(judged),
			title: signed?.title ?? 'Content that cannot be read',
			lines: (signed?.lines ?? []).map(({ label, value }) => ({ label, value })),
			differences:
				signed && judged.standing === 'broken'
					? differencesOf(signed, judged.now?.sheet ?? null)
					: []
		};
	});

/** What waits for the actor’s signature, each record as it would be signed; or one record alone. */
export async function findWaiting(
	actor: Actor,
	studyId: string,
	only?: { record: RecordKind; recordId: string }
): Promise<WaitingToSign> {
	const items = await read(actor, 'signature.sign', { studyId }, async (reader) => {
		const found: WaitingToSign['items'] = [];
		for (const record of recordKinds) {
			if (only && only.record !== record) continue;
			found.push(...(await waitingOf(reader, actor, studyId, record, only?.recordId)));
		}
		return found;
	});
	return { needs: await signingNeeds(actor), items };
}

async function waitingOf(
	reader: Reader,
	actor: Actor,
	studyId: string,
	record: RecordKind,
	recordId?: string
): Promise<WaitingToSign['items']> {
	const { capability, find, waiting } = signableKinds[record];
	const ids = recordId
		? [recordId]
		: await waiting(reader, studyId, sitesAllowing(actor.grants, capability, studyId), mostAtOnce);
	const records = (await find(reader, ids)).filter(
		(each) =>
			each.studyId === studyId &&
			each.obstacle === null &&
			may(actor.grants, capability, { studyId, siteId: each.siteId })
	);
	const signed = await judgedOf(
		reader,
		record,
		records.map((each) => each.recordId)
	);
	const [meaning] = meaningsOf[record];
	return records.flatMap((each) => {
		const own = signed.filter(
			({ kept }) => kept.record_id === each.recordId && kept.meaning === meaning
		);
		if (own.some(({ standing }) => standing === 'stands')) return [];
		const last = own.at(-1);
		return [
			{
				record,
				recordId: each.recordId,
				meaning,
				statement: meanings[meaning],
				title: each.sheet.title,
				place: each.place,
				lines: each.sheet.lines.map(({ label, value }) => ({ label, value })),
				sha256: fingerprintNow(sheetText(each.sheet)),
				broken: last ? viewOf(last) : null
			}
		];
	});
}

/** Within a read or a change: whether a signature of the record with its usual meaning stands. */
export async function isSigned(
	reader: Reader,
	record: RecordKind,
	recordId: string
): Promise<boolean> {
	const [meaning] = meaningsOf[record];
	return (await judgedOf(reader, record, [recordId])).some(
		({ kept, standing }) => kept.meaning === meaning && standing === 'stands'
	);
}
