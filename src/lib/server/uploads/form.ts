import { keepScan, maySendScan } from '$lib/domain/upload/upload.commands.server';
import type { ScanOutput } from '$lib/domain/upload/upload.input';
import { Refusal } from '$lib/refusal';
import type { Actor } from '../actor';
import { readForm } from '../forms';
import { refuseByLength } from './read-scan';

/** What a form puts around the file. */
const aroundFile = 16 * 1024;

/** A scan sent by a form, for a page without its program. Whoever may not send one has none of it read. */
export async function receiveScan(
	actor: Actor,
	studyId: string,
	consentId: string,
	request: Request
): Promise<ScanOutput> {
	await maySendScan(actor, studyId, consentId);
	refuseByLength(request.headers, aroundFile);
	const form = await readForm(request);
	const file = form.get('file');
	if (!(file instanceof File) || (file.size === 0 && file.name === ''))
		throw new Refusal('RULE', { why: 'Choose a file first.' });
	return keepScan(actor, studyId, consentId, {
		bytes: Buffer.from(await file.arrayBuffer()),
		name: file.name,
		type: file.type,
		reason: String(form.get('reason') ?? '')
	});
}
