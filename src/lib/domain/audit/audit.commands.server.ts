import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { change } from '$lib/server/change';
import type { AuditFilter } from './audit.input';

/** Writes down that the trail is being taken out, and how far it reached at that moment. */
export const beginExport = (actor: Actor, studyId: string, filter: AuditFilter): Promise<string> =>
	change(actor, 'audit.export', { studyId }, async (writer) => {
		const { rows } = await sql<{ event: string }>`
			select audit.act('audit', null, ${studyId}::uuid, null, null, ${JSON.stringify({ exported: true, ...filter })}::jsonb) as event
		`.execute(writer);
		return rows[0]?.event ?? '0';
	});
