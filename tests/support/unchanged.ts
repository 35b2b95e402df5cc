import type { FreshDatabase } from './database';

/** What the tables hold, as one digest for each: equal before and after when nothing was written. */
export async function contents(database: FreshDatabase): Promise<Record<string, string>> {
	const [tables] = await database.sql(
		`select table_schema || '.' || quote_ident(table_name) as name from information_schema.tables
			where table_type = 'BASE TABLE' and (table_schema in ('app', 'closed') or (table_schema = 'queue' and table_name = 'job'))
				and table_name not in ('rate_limit', 'event') and table_name not like 'kysely_%'
			order by 1`
	);
	// Being seen is no change: the minute of a session's last use moves by itself.
	const row = (name: string) => (name === 'app.session' ? `to_jsonb(t) - 'seen_at'` : 't');
	const [rows] = await database.sql(
		(tables ?? [])
			.map(
				({ name }) =>
					`select '${name}' as name, count(*) || ':' || coalesce(md5(string_agg((${row(name)})::text, '' order by (${row(name)})::text)), '') as held from ${name} t`
			)
			.join(' union all ')
	);
	// Turned-away attempts are events; anything else in the trail would be a change.
	const [events] = await database.sql(
		`select count(*)::text as held from audit.event where action <> 'refused'`
	);
	return Object.fromEntries([
		...(rows ?? []).map(({ name, held }) => [name, held]),
		['audit.event', events?.[0].held]
	]);
}
