import { sql } from 'kysely';
import type { Grant } from '$lib/domain/person/roles';
import { Refusal } from '$lib/refusal';
import type { Actor } from '../actor';
import { database } from '../db/db';

/** The actor for whom a job works, with the grants in force now: a role taken away meanwhile counts. */
export async function actorFor(personId: string, requestId: string): Promise<Actor> {
	const { rows } = await sql<{ name: string; email: string; grants: Grant[] }>`
		select p.name, p.email,
			coalesce((select jsonb_agg(jsonb_build_object('role', r.role, 'studyId', r.study_id, 'siteId', r.site_id))
				from app.person_role r where r.person_id = p.id and app.in_force(r, (app.now() at time zone 'UTC')::date)), '[]') as grants
		from app.person p where p.id = ${personId}::uuid and p.active`.execute(database().kysely);
	const found = rows[0];
	if (!found) throw new Refusal('NOT_PERMITTED');
	return { personId, ...found, sessionId: null, requestId, system: false };
}
