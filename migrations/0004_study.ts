import { sql, type Kysely } from 'kysely';

/** What a study plans: protocol versions, visits, measures, which measure at which visit; rooms; consent versions. */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table app.protocol_version (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	number integer not null check (number >= 1),
	definition jsonb not null,
	status text not null default 'draft' check (status in ('draft', 'published')),
	published_at timestamptz,
	published_by uuid references app.person (id),
	version integer not null default 1,
	unique (study_id, number),
	check ((status = 'published') = (published_at is not null))
);
create unique index one_draft on app.protocol_version (study_id) where status = 'draft';

create function app.keep_published() returns trigger language plpgsql as $$
begin
	if old.status = 'published' then
		raise exception using errcode = 'HD005', message = 'A published protocol version never changes.';
	end if;
	return new;
end $$;
create trigger keep_published before update on app.protocol_version for each row execute function app.keep_published();

create table app.planned_visit (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	protocol_version_id uuid not null references app.protocol_version (id),
	key text not null,
	name text not null check (length(name) between 1 and 120),
	position integer not null,
	spec jsonb not null,
	length_minutes integer not null check (length_minutes between 5 and 720),
	unique (protocol_version_id, key)
);

create table app.measure (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	protocol_version_id uuid not null references app.protocol_version (id),
	key text not null,
	name text not null check (length(name) between 1 and 120),
	unit text not null default '1',
	decimals integer not null default 0 check (decimals between 0 and 8),
	kind text not null check (kind in ('number', 'choice', 'date', 'text', 'repeated', 'derived')),
	position integer not null,
	spec jsonb not null,
	unique (protocol_version_id, key)
);

create table app.planned_measure (
	planned_visit_id uuid not null references app.planned_visit (id),
	measure_id uuid not null references app.measure (id),
	study_id uuid not null references app.study (id),
	primary key (planned_visit_id, measure_id)
);

create table app.room (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	name text not null check (length(name) between 1 and 80),
	version integer not null default 1,
	unique (site_id, name)
);

create table app.consent_version (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	label text not null check (length(label) between 1 and 60),
	language text not null default 'en',
	approved_on date not null,
	version integer not null default 1,
	unique (study_id, label, language)
);

create trigger protocol_version_version before update on app.protocol_version for each row execute function app.bump_version();
create trigger room_version before update on app.room for each row execute function app.bump_version();
create trigger consent_version_version before update on app.consent_version for each row execute function app.bump_version();
create trigger protocol_version_audit after insert or update or delete on app.protocol_version for each row execute function audit.record_change();
create trigger planned_visit_audit after insert or update or delete on app.planned_visit for each row execute function audit.record_change();
create trigger measure_audit after insert or update or delete on app.measure for each row execute function audit.record_change();
create trigger planned_measure_audit after insert or update or delete on app.planned_measure for each row execute function audit.record_change();
create trigger room_audit after insert or update or delete on app.room for each row execute function audit.record_change();
create trigger consent_version_audit after insert or update or delete on app.consent_version for each row execute function audit.record_change();

grant select, insert, update on app.protocol_version, app.room, app.consent_version to heddle_app;
grant select, insert on app.planned_visit, app.measure, app.planned_measure to heddle_app;
grant select on app.protocol_version, app.planned_visit, app.measure, app.planned_measure, app.room to heddle_unmasked;
`.execute(db);
}
