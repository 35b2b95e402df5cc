import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import type { Capability } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import type { PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';

export interface SiteNow {
	id: string;
	code: string;
	name: string;
	zone: string;
	/** The day on the site's calendar. */
	today: PlainDate;
	/** The day from which it may see subjects: its ethics committee's approval. */
	approvedOn: string | null;
}

/** Within a read or a change: a site of the study and the day it is there. */
export async function getSite(reader: Reader, studyId: string, siteId: string): Promise<SiteNow> {
	const site = await reader
		.selectFrom('site')
		.select(['id', 'code', 'name', 'zone', 'approved_on as approvedOn'])
		.where('study_id', '=', studyId)
		.where('id', '=', siteId)
		.executeTakeFirst();
	if (!site) throw new Refusal('NOT_FOUND');
	return { ...site, today: dateInZone(clock.now(), site.zone) };
}

/**
 * The site a screening or a subject belongs to, so that the door can be asked about that site. Another study's or
 * site's record is not found.
 */
export const siteOf = (
	actor: Actor,
	capability: Capability,
	table: 'screening' | 'subject',
	studyId: string,
	id: string
): Promise<string> =>
	read(actor, capability, { studyId }, async (reader) => {
		const found = await reader
			.selectFrom(table)
			.select('site_id')
			.where('study_id', '=', studyId)
			.where('id', '=', id)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		return found.site_id;
	});
