import { sql, type Kysely } from 'kysely';

/**
 * Row-level security, forced on every study table: the second lock behind the table of permissions. A policy names the
 * scope function in a sub-select so that it is worked out once a statement. The owner's own policy serves migrations
 * and the closed schema's functions, which check for themselves.
 */
const byStudy = [
	'protocol_version',
	'planned_visit',
	'measure',
	'planned_measure',
	'consent_version',
	'import_batch',
	'cut',
	'monitoring_plan',
	'look',
	'report',
	'release',
	'download',
	'recommendation',
	'allocation_record'
];
const bySite = [
	'room',
	'subject',
	'contact_details',
	'screening',
	'consent',
	'study_exit',
	'visit',
	'appointment',
	'contact_attempt',
	'deviation',
	'measurement'
];

export async function up(db: Kysely<unknown>): Promise<void> {
	const lock = async (table: string, seen: string) => {
		await sql`
alter table ${sql.raw(table)} enable row level security;
alter table ${sql.raw(table)} force row level security;
create policy of_the_owner on ${sql.raw(table)} to heddle_owner using (true) with check (true);
create policy of_the_look_worker on ${sql.raw(table)} to heddle_unmasked using (true) with check (true);
create policy of_the_actor on ${sql.raw(table)} to heddle_app using (${sql.raw(seen)}) with check (${sql.raw(seen)});
`.execute(db);
	};
	const study = (column: string) =>
		`(select app.everywhere()) or (select app.my_studies()) @> array[${column}]`;
	const site = (column: string) =>
		`(select app.everywhere()) or (select app.my_sites()) @> array[${column}]`;
	await lock('app.study', study('id'));
	await lock('app.site', study('study_id'));
	for (const table of byStudy) await lock(`app.${table}`, study('study_id'));
	for (const table of bySite) await lock(`app.${table}`, site('site_id'));
	// Rows that may belong to no study: seen by everyone whom the permission table lets ask for them.
	// The administrator keeps the machine running and sees every job, though not what it works on.
	await lock(
		'app.job_run',
		`study_id is null or ${study('study_id')} or (select app.has_role(array['administrator'], null, null))`
	);
	await lock('app.mail', `study_id is null or ${study('study_id')}`);
	await lock('app.feed', study('study_id'));
	// Site rows of the trail are for those who see the site; rows of a study without a site, for the study's people.
	await sql`
alter table audit.event enable row level security;
create policy of_the_owner on audit.event to heddle_owner using (true) with check (true);
create policy of_the_look_worker on audit.event for select to heddle_unmasked using (true);
create policy of_the_actor on audit.event for select to heddle_app using (
	(select app.everywhere()) or study_id is null
	or ((select app.my_studies()) @> array[study_id] and (site_id is null or (select app.my_sites()) @> array[site_id])));
revoke execute on all functions in schema app from public;
grant execute on all functions in schema app to heddle_app, heddle_unmasked;
`.execute(db);
}
