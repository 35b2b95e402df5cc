import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { change } from '$lib/server/change';
import { sitesFor } from '../study/sites.server';
import { matchesName } from './contact-search';
import type { ContactSearchInput } from './subject.input';

export interface ContactFound {
	subjectId: string;
	number: string;
	site: string;
	name: string;
}

const mostFound = 20;

/**
 * Finds people of the actor's own sites by name. Each one that is found counts as a reading of their contact details and
 * stands so in the trail; what was looked for does not, for it is a name.
 */
export const searchContacts = (
	actor: Actor,
	studyId: string,
	input: ContactSearchInput
): Promise<{ items: ContactFound[]; more: boolean }> =>
	change(actor, 'contact.read', { studyId }, async (writer) => {
		const sites = await sitesFor(writer, actor, studyId, 'contact.read');
		if (sites.length === 0) return { items: [], more: false };
		const rows = await writer
			.selectFrom('contact_details as c')
			.innerJoin('subject as s', 's.id', 'c.subject_id')
			.select(['c.subject_id', 's.number', 'c.site_id', 'c.name'])
			.where('c.study_id', '=', studyId)
			.where(
				'c.site_id',
				'in',
				sites.map((site) => site.id)
			)
			.orderBy('s.number')
			.execute();
		const found = rows.filter((row) => matchesName(row.name, input.name));
		const shown = found.slice(0, mostFound);
		const names = new Map(sites.map((site) => [site.id, site.name]));
		for (const row of shown)
			await sql`select audit.act('contact_details', ${row.subject_id}, ${studyId}::uuid, ${row.site_id}::uuid, ${row.subject_id}::uuid, '{"read": true}')`.execute(
				writer
			);
		return {
			items: shown.map((row) => ({
				subjectId: row.subject_id,
				number: row.number,
				site: names.get(row.site_id) ?? '',
				name: row.name
			})),
			more: found.length > shown.length
		};
	});
