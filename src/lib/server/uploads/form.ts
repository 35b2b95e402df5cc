import { fail, type RequestEvent } from '@sveltejs/kit';
import { z } from 'zod';
import { keepScan, maySendScan } from '$lib/domain/upload/upload.commands.server';
import { Refusal } from '$lib/refusal';
import { readForm } from '../forms';
import { actorOf } from '../serve';
import { refuseByLength } from './read-scan';

const aroundFile = 16 * 1024;

/** A scan sent by a form, for a page without its program: the consent is named in the address's query. */
export async function receiveScan(event: RequestEvent) {
	const studyId = event.params.study ?? '';
	const actor = actorOf(event);
	const consentId = z.uuid().safeParse(event.url.searchParams.get('consent'));
	const said = (refusal: Refusal) =>
		fail(refusal.status, {
			scan: { kind: 'refused' as const, text: refusal.fields.file ?? refusal.message }
		});
	try {
		if (!consentId.success) throw new Refusal('NOT_FOUND');
		await maySendScan(actor, studyId, consentId.data);
		refuseByLength(event.request.headers, aroundFile);
		const form = await readForm(event.request);
		const file = form.get('file');
		if (!(file instanceof File) || (file.size === 0 && file.name === ''))
			throw new Refusal('RULE', { why: 'Choose a file first.' });
		await keepScan(actor, studyId, consentId.data, {
			bytes: Buffer.from(await file.arrayBuffer()),
			name: file.name,
			type: file.type,
			reason: String(form.get('reason') ?? '')
		});
		return { scan: { kind: 'done' as const, text: 'The scan is kept.' } };
	} catch (thrown) {
		if (thrown instanceof Refusal) return said(thrown);
		throw thrown;
	}
}
