import { newId } from '../../src/lib/id';
import type { Actor } from '../../src/lib/server/actor';
import type { Grant, Role } from '../../src/lib/domain/person/roles';
import type { FreshDatabase } from './database';
import { asOwner } from './people';

/** An actor as a request would make it, for calling commands without one. */
export const actorFrom = (
	person: { id: string; name?: string; email?: string },
	grants: Grant[] = []
): Actor => ({
	personId: person.id,
	name: person.name ?? 'Test Person',
	email: person.email ?? 'test@example.org',
	sessionId: null,
	requestId: newId(),
	grants,
	system: false
});

export const grant = (
	role: Role,
	studyId: string | null = null,
	siteId: string | null = null
): Grant => ({ role, studyId, siteId });

export interface BareStudy {
	studyId: string;
	siteIds: [string, string];
}

/** A study with two sites and nothing in it. */
export async function addBareStudy(
	database: FreshDatabase,
	code: string,
	masked = true
): Promise<BareStudy> {
	const studyId = newId();
	const siteIds: [string, string] = [newId(), newId()];
	await asOwner(database, async (client) => {
		await client.query(
			`insert into app.study (id, code, name, masked, status) values ($1, $2, $3, $4, 'open')`,
			[studyId, code, `Study ${code}`, masked]
		);
		for (const [at, id] of siteIds.entries())
			await client.query(
				`insert into app.site (id, study_id, code, name, zone) values ($1, $2, $3, $4, $5)`,
				[
					id,
					studyId,
					`0${at + 1}`,
					at === 0 ? 'Northmoor' : 'Saltreach',
					at === 0 ? 'Europe/Berlin' : 'America/New_York'
				]
			);
	});
	return { studyId, siteIds };
}
