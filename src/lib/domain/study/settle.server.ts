import { sql } from 'kysely';
import { newId } from '$lib/id';
import type { Writer } from '$lib/server/change';
import type { StudyDefinition } from './definition';

/** A room's name as its table holds it. */
const roomName = (name: string) => name.slice(0, 80);

/**
 * Brings the study's rows of sites, rooms and consent versions to what the definition says. Until the study is first
 * published, what the definition no longer has is taken away, if nothing hangs on it.
 */
export async function settleStudy(
	writer: Writer,
	studyId: string,
	definition: StudyDefinition
): Promise<void> {
	const sites = definition.sites.map((site) => ({
		id: newId(),
		code: site.code,
		name: site.name,
		zone: site.zone,
		opening: site.openingHours,
		closures: site.closures ?? [],
		rooms: [...new Set(site.rooms.map((room) => roomName(room.name)))].map((name) => ({
			id: newId(),
			name
		}))
	}));
	const consents = definition.consentVersions.map((version) => ({
		id: newId(),
		label: version.version,
		language: version.language ?? 'en',
		approved_on: version.from
	}));
	await sql`select app.settle_study(${studyId}::uuid, ${JSON.stringify(sites)}::jsonb, ${JSON.stringify(consents)}::jsonb)`.execute(
		writer
	);
}
