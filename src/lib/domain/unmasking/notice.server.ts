import { sql } from 'kysely';
import type { Reader, Writer } from '$lib/server/change';
import { queueMail } from '$lib/server/mail/queue-mail';

/** Who is told of an unmasking. */
export const toldRoles = ['investigator', 'data_manager', 'independent_statistician'] as const;

/**
 * Who is told at once: the investigators of the site, the data managers and the independent statisticians of the study. The
 * mail says that something happened and where to read of it; neither study nor subject stands in it, and nobody's arm.
 */
export async function tellUnmasked(writer: Writer, studyId: string, siteId: string): Promise<void> {
	for (const personId of await peopleWith(writer, studyId, siteId, toldRoles))
		await queueMail(writer, { kind: 'unmasking', personId, studyId });
}

/** Active people who hold one of these roles today, in the study or at the site. */
export async function peopleWith(
	reader: Reader,
	studyId: string,
	siteId: string,
	roles: readonly string[]
): Promise<string[]> {
	const { rows } = await sql<{ id: string }>`
		select distinct p.id from app.person_role r join app.person p on p.id = r.person_id
		where p.active and r.role = any (${[...roles]}) and (r.study_id is null or r.study_id = ${studyId}::uuid)
			and (r.site_id is null or r.site_id = ${siteId}::uuid)
			and app.in_force(r, (app.now() at time zone 'UTC')::date) order by p.id`.execute(reader);
	return rows.map((row) => row.id);
}
