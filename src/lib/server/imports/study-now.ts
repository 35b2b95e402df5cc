import { sql } from 'kysely';
import type { StudyNow } from '$lib/domain/import/plan';
import { readDefinition } from '$lib/domain/study/template';
import { Refusal } from '$lib/refusal';
import type { Reader } from '../change';

interface ImportedRow {
	id: string;
	site_id: string;
	imported_as: string;
	characteristics: Record<string, unknown>;
	times: (string | null)[];
	planned: (string | null)[];
}

/** What stands in the study before an import, and which protocol version the import belongs to. */
export async function studyNow(
	reader: Reader,
	studyId: string
): Promise<
	StudyNow & { masked: boolean; protocolVersion: { id: string; version: number; number: number } }
> {
	const study = await reader
		.selectFrom('study')
		.select('masked')
		.where('id', '=', studyId)
		.executeTakeFirst();
	if (!study) throw new Refusal('NOT_FOUND');
	const versions = await reader
		.selectFrom('protocol_version')
		.select(['id', 'number', 'version', 'status', 'definition'])
		.where('study_id', '=', studyId)
		.orderBy('number', 'desc')
		.execute();
	// A draft amendment does not count where there is a published version: subjects enter under that one.
	const current = versions.find(({ status }) => status === 'published') ?? versions[0];
	if (!current) throw new Refusal('NOT_FOUND');
	const held = readDefinition(current.definition);
	if (!held.ok) throw new Error(`The definition of study ${studyId} does not hold.`);
	const { rows: sites } = await sql<StudyNow['sites'][number]>`
		select s.id, s.code, s.name,
			coalesce((select max(substring(x.number from 4 for 4)::int) from app.subject x
				where x.study_id = s.study_id and x.site_id = s.id and x.number ~ '^[0-9]{2}-[0-9]{4}-[0-9]$'), 0) as subjects
		from app.site s where s.study_id = ${studyId}::uuid order by s.code`.execute(reader);
	const { rows: imported } = await sql<ImportedRow>`
		select s.id, s.site_id, s.imported_as, s.characteristics,
			coalesce(jsonb_agg(coalesce(v.happened_on::text, v.study_time::text)) filter (where v.id is not null), '[]') as times,
			coalesce(jsonb_agg(p.key) filter (where p.id is not null), '[]') as planned
		from app.subject s left join app.visit v on v.subject_id = s.id
			left join app.planned_visit p on p.id = v.planned_visit_id
		where s.study_id = ${studyId}::uuid and s.imported_as is not null
		group by s.id`.execute(reader);
	const timeOf = (text: string) => (/^\d{4}-\d{2}-\d{2}$/.test(text) ? text : String(Number(text)));
	const present = (each: string | null): each is string => each !== null;
	return {
		masked: study.masked,
		definition: held.definition,
		published: current.status === 'published',
		protocolVersion: { id: current.id, version: current.version, number: current.number },
		sites,
		imported: new Map(
			imported.map((row) => [
				row.imported_as,
				{
					id: row.id,
					siteId: row.site_id,
					characteristics: row.characteristics,
					times: new Set(row.times.filter(present).map(timeOf)),
					plannedKeys: new Set(row.planned.filter(present))
				}
			])
		)
	};
}
