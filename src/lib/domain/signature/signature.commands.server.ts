import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { beginSigning, proveSigner } from '$lib/server/auth/signing';
import { change, read, type Writer } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { fingerprintNow } from '../cut/fingerprint.server';
import { signableKinds } from './kinds.server';
import { judgedOf } from './standing.server';
import { formVersion, meanings, meaningsOf, recordKinds, sheetText } from './signature';
import type { Signable } from './signable';
import type { SignInput, SignItem } from './signature.input';

/**
 * Signs these records, one signature each, all of them or none. Each is built again from the record as it stands and must
 * be what was shown; the signer proves to be who is signed in.
 */
export async function sign(
	actor: Actor,
	studyId: string,
	{ items, ...secrets }: SignInput
): Promise<{ signatures: { id: string; record: SignItem['record']; recordId: string }[] }> {
	const scope = { studyId };
	mustBeDifferent(items);
	// Whoever may not sign is turned away before a password is asked for.
	await read(actor, 'signature.sign', scope, async () => {});
	await proveSigner(actor, scope, secrets);
	return change(actor, 'signature.sign', scope, async (writer) => {
		const signatures = [];
		for (const [item, signable] of await held(writer, items)) {
			const id = newId();
			await mustBeSignable(writer, actor, studyId, item, signable);
			await writer
				.insertInto('signature')
				.values({
					id,
					study_id: studyId,
					site_id: signable.siteId,
					record: item.record,
					record_id: item.recordId,
					meaning: item.meaning,
					statement: meanings[item.meaning],
					form_version: formVersion,
					content: sheetText(signable.sheet),
					sha256: item.sha256,
					signer_id: actor.personId,
					session_id: actor.sessionId as string
				})
				.execute();
			signatures.push({ id, record: item.record, recordId: item.recordId });
		}
		await beginSigning(writer, actor);
		return { signatures };
	});
}

function mustBeDifferent(items: readonly SignItem[]): void {
	const names = items.map((item) => `${item.record} ${item.recordId}`);
	const twice = names.findIndex((name, at) => names.indexOf(name) < at);
	if (twice >= 0)
		throw new Refusal('INVALID', {}, { [`items.${twice}`]: 'This record is in the list twice.' });
}

/** The records of the items, held so that nobody changes them before the signatures are written. */
async function held(writer: Writer, items: readonly SignItem[]): Promise<[SignItem, Signable][]> {
	const pairs: [SignItem, Signable][] = [];
	for (const record of recordKinds) {
		const wanted = items.filter((item) => item.record === record);
		if (wanted.length === 0) continue;
		const found = await signableKinds[record].find(
			writer,
			wanted.map((item) => item.recordId),
			true
		);
		for (const item of wanted) {
			const signable = found.find((each) => each.recordId === item.recordId);
			if (!signable) throw new Refusal('NOT_FOUND');
			pairs.push([item, signable]);
		}
	}
	return pairs;
}

async function mustBeSignable(
	writer: Writer,
	actor: Actor,
	studyId: string,
	item: SignItem,
	signable: Signable
): Promise<void> {
	const { capability } = signableKinds[item.record];
	const { title } = signable.sheet;
	const { siteId } = signable;
	if (signable.studyId !== studyId || !may(actor.grants, capability, { studyId, siteId }))
		throw new Refusal('NOT_FOUND');
	if (!meaningsOf[item.record].includes(item.meaning))
		throw new Refusal('NOT_SIGNABLE', { title, why: 'A signature of it does not mean this.' });
	if (fingerprintNow(sheetText(signable.sheet)) !== item.sha256)
		throw new Refusal('SHOWN_CHANGED', { title });
	if (signable.obstacle !== null)
		throw new Refusal('NOT_SIGNABLE', { title, why: signable.obstacle });
	const before = await judgedOf(writer, item.record, [item.recordId]);
	if (before.some(({ kept, standing }) => kept.meaning === item.meaning && standing === 'stands'))
		throw new Refusal('SIGNED_ALREADY', { title });
}
