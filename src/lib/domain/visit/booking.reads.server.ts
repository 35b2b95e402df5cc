import { sql } from 'kysely';
import type { Reader } from '$lib/server/change';
import type { PlainDate } from '$lib/time/dates';

export interface StaffMember {
	id: string;
	name: string;
}

/** Who may take visits at the site on that day: by the grants in force on it, not today's. */
export const staffOn = (
	reader: Reader,
	studyId: string,
	siteId: string,
	on: PlainDate
): Promise<StaffMember[]> =>
	reader
		.selectFrom('person as p')
		.select(['p.id', 'p.name'])
		.where('p.active', '=', true)
		.where((where) =>
			where.exists(
				where
					.selectFrom('person_role as r')
					.select('r.id')
					.whereRef('r.person_id', '=', 'p.id')
					.where('r.role', 'in', ['nurse', 'investigator', 'coordinator'])
					.where('r.study_id', '=', studyId)
					.where((inner) =>
						inner.or([inner('r.site_id', 'is', null), inner('r.site_id', '=', siteId)])
					)
					.where('r.valid_from', '<=', on)
					.where((inner) =>
						inner.or([inner('r.valid_to', 'is', null), inner('r.valid_to', '>=', on)])
					)
			)
		)
		.orderBy(sql`lower(p.name)`)
		.orderBy('p.id')
		.execute();
