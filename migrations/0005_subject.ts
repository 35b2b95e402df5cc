import { sql, type Kysely } from 'kysely';

/** Subjects and their way in and out; contact details stand apart, with a permission of their own. */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table app.subject (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null,
	protocol_version_id uuid not null references app.protocol_version (id),
	number text not null check (length(number) between 1 and 40),
	imported_as text check (length(imported_as) between 1 and 80),
	enrolled_on date not null,
	randomised_at timestamptz,
	randomised_on date,
	kit_number text,
	stratum jsonb not null default '{}',
	characteristics jsonb not null default '{}',
	version integer not null default 1,
	unique (study_id, number),
	foreign key (study_id, site_id) references app.site (study_id, id),
	check ((randomised_at is null) = (randomised_on is null)),
	check (enrolled_on between date '1900-01-01' and date '2200-01-01')
);
create unique index subject_imported_as on app.subject (study_id, imported_as) where imported_as is not null;
create index subject_site on app.subject (site_id, number);

create table app.contact_details (
	subject_id uuid primary key references app.subject (id),
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	name text not null check (length(btrim(name)) between 1 and 120),
	email text check (email is null or length(email) <= 254),
	phone text check (phone is null or length(phone) <= 40),
	language text not null default 'en',
	version integer not null default 1
);

create table app.screening (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	number integer not null check (number >= 1),
	screened_on date not null,
	outcome text not null default 'in progress' check (outcome in ('in progress', 'entered', 'not entered')),
	reason text check (reason is null or length(reason) between 1 and 500),
	eligibility jsonb not null default '{}',
	subject_id uuid unique references app.subject (id),
	version integer not null default 1,
	unique (site_id, number),
	check ((outcome = 'entered') = (subject_id is not null)),
	check (outcome <> 'not entered' or reason is not null)
);
create index screening_site on app.screening (site_id, number);

create table app.consent (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	screening_id uuid not null references app.screening (id),
	subject_id uuid references app.subject (id),
	consent_version_id uuid not null references app.consent_version (id),
	signed_at timestamptz not null,
	signed_by text not null check (signed_by in ('participant', 'representative')),
	explained_by uuid not null references app.person (id),
	copy_given boolean not null,
	version integer not null default 1
);
create index consent_screening on app.consent (screening_id);

create table app.study_exit (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	kind text not null check (kind in ('intervention discontinued', 'stopped visits', 'consent withdrawn', 'lost to follow-up', 'died', 'completed')),
	happened_on date not null,
	reason text check (reason is null or length(reason) <= 500),
	version integer not null default 1
);
create index study_exit_subject on app.study_exit (subject_id);

create trigger subject_version before update on app.subject for each row execute function app.bump_version();
create trigger contact_details_version before update on app.contact_details for each row execute function app.bump_version();
create trigger screening_version before update on app.screening for each row execute function app.bump_version();
create trigger consent_version before update on app.consent for each row execute function app.bump_version();
create trigger study_exit_version before update on app.study_exit for each row execute function app.bump_version();
create trigger subject_begun after insert on app.subject referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger subject_audit after update or delete on app.subject for each row execute function audit.record_change();
create trigger contact_details_audit after insert or update or delete on app.contact_details for each row execute function audit.record_change('', 'personal');
create trigger screening_audit after insert or update or delete on app.screening for each row execute function audit.record_change();
create trigger consent_audit after insert or update or delete on app.consent for each row execute function audit.record_change();
create trigger study_exit_audit after insert or update or delete on app.study_exit for each row execute function audit.record_change();

grant select, insert, update on app.subject, app.contact_details, app.screening, app.consent, app.study_exit to heddle_app;
grant select on app.subject, app.study_exit to heddle_unmasked;
`.execute(db);
}
