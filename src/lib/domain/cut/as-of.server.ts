import { sql, type QueryExecutorProvider } from 'kysely';

type Kept = 'measurement' | 'visit' | 'subject' | 'study_exit' | 'site' | 'screening';

/**
 * The rows of a table as they stood at an instant, by the audit trail: rows made later are left out, and whatever
 * changed later is put back, the newest change first. Values are JSON: instants and dates come as text.
 */
export async function rowsAsOf<T>(
	on: QueryExecutorProvider,
	table: Kept,
	studyId: string,
	instant: Date
): Promise<T[]> {
	const { rows } = await sql<{ row: T }>`
with later as materialized (
	select e.id, e.record_id, e.action, e.before from audit.event e
	where e.study_id = ${studyId}::uuid and e.record = ${table} and e.at > ${instant}
		and e.action in ('create', 'change')
), not_yet as (
	select distinct record_id from later where action = 'create'
), back as (
	select l.record_id, jsonb_object_agg(k.key, k.value order by l.id desc) as stood
	from later l cross join lateral jsonb_each(l.before) k where l.action = 'change' group by l.record_id
)
select to_jsonb(t) || coalesce(b.stood, '{}') as row
from ${sql.table(`app.${table}`)} t
left join back b on b.record_id = t.id::text
where t.study_id = ${studyId}::uuid and not exists (select from not_yet n where n.record_id = t.id::text)`.execute(
		on
	);
	return rows.map(({ row }) => row);
}
