import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { consentViews, type ConsentView } from '../consent/consent.reads.server';
import { maySendScan } from './upload.commands.server';

export interface ConsentForScan {
	consent: ConsentView;
	/** Whose it is: a subject's number, or the screening's. */
	of: string;
	back: string;
}

/** One consent with its scans, for who may see them. */
export async function getConsentForScan(
	actor: Actor,
	studyId: string,
	consentId: string
): Promise<ConsentForScan> {
	const scope = await maySendScan(actor, studyId, consentId);
	return read(actor, 'consent.scan', scope, async (reader) => {
		const row = await reader
			.selectFrom('consent as c')
			.innerJoin('site as t', 't.id', 'c.site_id')
			.leftJoin('screening as g', 'g.id', 'c.screening_id')
			.leftJoin('subject as s', 's.id', 'c.subject_id')
			.select([
				't.zone',
				't.code',
				'g.id as screening_id',
				'g.number as screening',
				's.id as subject_id',
				's.number'
			])
			.where('c.study_id', '=', studyId)
			.where('c.id', '=', consentId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		const views = await consentViews(
			reader,
			row.screening_id ? { screeningId: row.screening_id } : { subjectId: row.subject_id ?? '' },
			row.zone,
			true
		);
		const consent = views.find((view) => view.id === consentId);
		if (!consent) throw new Refusal('NOT_FOUND');
		const study = `/studies/${studyId}`;
		return {
			consent,
			of: row.number ? `subject ${row.number}` : `screening ${row.code}/${row.screening ?? ''}`,
			back: row.subject_id
				? `${study}/subjects/${row.subject_id}`
				: `${study}/screening/${row.screening_id ?? ''}`
		};
	});
}
