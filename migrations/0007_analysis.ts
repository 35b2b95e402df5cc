import { sql, type Kysely } from 'kysely';

/** Jobs, mail, feeds, imports; then data cuts, the monitoring plan, looks, reports, releases, recommendations. */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table app.job_run (
	id uuid primary key,
	queue text not null,
	title text not null check (length(title) <= 200),
	study_id uuid references app.study (id),
	status text not null default 'waiting' check (status in ('waiting', 'running', 'done', 'failed', 'cancelled')),
	fraction real not null default 0 check (fraction between 0 and 1),
	message text not null default '',
	attempts integer not null default 0,
	cancel_asked boolean not null default false,
	requested_by uuid not null references app.person (id),
	created_at timestamptz not null default app.now(),
	started_at timestamptz,
	finished_at timestamptz,
	error text,
	result jsonb,
	version integer not null default 1
);
create index job_run_recent on app.job_run (created_at desc);
create index job_run_study on app.job_run (study_id, created_at desc);

create table app.mail (
	id uuid primary key,
	kind text not null check (kind in ('invitation', 'reset', 'visit-invitation', 'visit-moved', 'visit-cancelled', 'report-released')),
	study_id uuid references app.study (id),
	site_id uuid references app.site (id),
	person_id uuid references app.person (id),
	subject_id uuid references app.subject (id),
	appointment_id uuid references app.appointment (id),
	facts jsonb not null default '{}',
	secret bytea,
	status text not null default 'waiting' check (status in ('waiting', 'sending', 'sent', 'failed', 'doubtful', 'no address')),
	message_id text not null unique,
	created_at timestamptz not null default app.now(),
	sent_at timestamptz,
	attempts integer not null default 0,
	error text,
	version integer not null default 1
);
create index mail_subject on app.mail (subject_id, created_at) where subject_id is not null;
create index mail_waiting on app.mail (created_at) where status in ('waiting', 'sending');

-- How many mails are in which state, for the administrator, who may not see whom they go to.
create function app.mail_state() returns table (status text, mails bigint)
language sql stable security definer set search_path = pg_catalog as $$
	select m.status, count(*) from app.mail m where app.has_role(array['administrator'], null, null) group by m.status
$$;

create table app.feed (
	id uuid primary key,
	person_id uuid not null references app.person (id),
	study_id uuid not null references app.study (id),
	site_id uuid references app.site (id),
	token_hash bytea not null unique,
	created_at timestamptz not null default app.now(),
	revoked_at timestamptz,
	version integer not null default 1
);

create table app.import_batch (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	file_name text not null check (length(file_name) <= 200),
	storage_key text not null,
	sha256 text not null check (sha256 ~ '^[0-9a-f]{64}$'),
	bytes integer not null,
	headers jsonb not null,
	mapping jsonb,
	status text not null default 'uploaded' check (status in ('uploaded', 'checking', 'checked', 'importing', 'imported', 'failed')),
	summary jsonb,
	job_run_id uuid references app.job_run (id),
	uploaded_by uuid not null references app.person (id),
	created_at timestamptz not null default app.now(),
	version integer not null default 1
);
create index import_batch_study on app.import_batch (study_id, created_at desc);

create table app.cut (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	number integer not null check (number >= 1),
	label text not null check (length(btrim(label)) between 1 and 120),
	cut_off_at timestamptz not null,
	extracted_at timestamptz not null,
	made_by uuid not null references app.person (id),
	subjects integer not null,
	measurements integer not null,
	fingerprint text not null check (fingerprint ~ '^[0-9a-f]{64}$'),
	content text not null,
	unique (study_id, number)
);

create table app.monitoring_plan (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	spec jsonb not null,
	signed_by uuid not null references app.person (id),
	signed_at timestamptz not null default app.now(),
	version integer not null default 1,
	unique (study_id)
);

create table app.look (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	cut_id uuid not null references app.cut (id),
	number integer not null check (number >= 1),
	kind text not null check (kind in ('pooled', 'by arm')),
	planned boolean not null default false,
	status text not null default 'waiting' check (status in ('waiting', 'running', 'done', 'failed', 'cancelled')),
	spec jsonb,
	result jsonb,
	input_hash text,
	engine_version text,
	error text,
	job_run_id uuid references app.job_run (id),
	requested_by uuid not null references app.person (id),
	requested_at timestamptz not null default app.now(),
	finished_at timestamptz,
	version integer not null default 1,
	unique (study_id, number),
	-- The open row of a by-arm look says that it was made, never what it asked or found.
	check (kind = 'pooled' or (spec is null and result is null and input_hash is null))
);

create table app.report (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	look_id uuid not null references app.look (id),
	kind text not null check (kind in ('open', 'closed')),
	status text not null default 'waiting' check (status in ('waiting', 'made', 'failed')),
	storage_key text,
	sha256 text,
	pages integer,
	error text,
	job_run_id uuid references app.job_run (id),
	made_by uuid not null references app.person (id),
	made_at timestamptz,
	version integer not null default 1,
	unique (look_id),
	check (kind = 'open' or (storage_key is null and sha256 is null and pages is null))
);

create table app.release (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	report_id uuid not null references app.report (id),
	person_id uuid not null references app.person (id),
	status text not null default 'asked' check (status in ('asked', 'approved', 'ready', 'failed')),
	asked_by uuid not null references app.person (id),
	asked_at timestamptz not null default app.now(),
	approved_by uuid references app.person (id),
	approved_at timestamptz,
	storage_key text,
	sha256 text,
	version integer not null default 1,
	unique (report_id, person_id),
	check (approved_by is null or approved_by <> asked_by),
	check ((status = 'asked') = (approved_at is null))
);

create table app.download (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	report_id uuid not null references app.report (id),
	person_id uuid not null references app.person (id),
	at timestamptz not null default app.now(),
	-- Of an open copy; that of a closed one stands in the closed schema.
	sha256 text
);

create table app.recommendation (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	report_id uuid not null references app.report (id),
	advice text not null check (advice in ('continue unchanged', 'continue with changes', 'pause', 'stop')),
	reason text not null check (length(btrim(reason)) between 1 and 4000),
	meeting_on date not null,
	attendees text not null check (length(btrim(attendees)) between 1 and 1000),
	recorded_by uuid not null references app.person (id),
	recorded_at timestamptz not null default app.now(),
	version integer not null default 1
);

-- The open record of the allocation list: that it exists, how it was made, its hash and count. Never what it holds.
create table app.allocation_record (
	id uuid primary key,
	study_id uuid not null unique references app.study (id),
	method text not null,
	hash text not null check (hash ~ '^[0-9a-f]{64}$'),
	count integer not null,
	asked_by uuid not null references app.person (id),
	made_at timestamptz not null default app.now(),
	version integer not null default 1
);

create trigger job_run_version before update on app.job_run for each row execute function app.bump_version();
create trigger job_run_begun after insert on app.job_run for each row execute function audit.record_change();
-- Progress is not a change worth a row each second; a change of status is.
create trigger job_run_audit after update on app.job_run for each row
	when (old.status is distinct from new.status or old.cancel_asked is distinct from new.cancel_asked) execute function audit.record_change();
create trigger mail_version before update on app.mail for each row execute function app.bump_version();
create trigger mail_audit after insert or update or delete on app.mail for each row execute function audit.record_change('secret', 'personal');
create trigger feed_version before update on app.feed for each row execute function app.bump_version();
create trigger feed_audit after insert or update or delete on app.feed for each row execute function audit.record_change('token_hash');
create trigger import_batch_version before update on app.import_batch for each row execute function app.bump_version();
create trigger import_batch_audit after insert or update or delete on app.import_batch for each row execute function audit.record_change();
create trigger cut_audit after insert or update or delete on app.cut for each row execute function audit.record_change('content');
create trigger monitoring_plan_version before update on app.monitoring_plan for each row execute function app.bump_version();
create trigger monitoring_plan_audit after insert or update or delete on app.monitoring_plan for each row execute function audit.record_change();
create trigger look_version before update on app.look for each row execute function app.bump_version();
create trigger look_audit after insert or update or delete on app.look for each row execute function audit.record_change('result');
create trigger report_version before update on app.report for each row execute function app.bump_version();
create trigger report_audit after insert or update or delete on app.report for each row execute function audit.record_change();
create trigger release_version before update on app.release for each row execute function app.bump_version();
create trigger release_audit after insert or update or delete on app.release for each row execute function audit.record_change();
create trigger download_audit after insert or update or delete on app.download for each row execute function audit.record_change();
create trigger recommendation_version before update on app.recommendation for each row execute function app.bump_version();
create trigger recommendation_audit after insert or update or delete on app.recommendation for each row execute function audit.record_change();
create trigger allocation_record_audit after insert or update or delete on app.allocation_record for each row execute function audit.record_change();

grant select, insert, update on app.job_run, app.mail, app.feed, app.import_batch, app.monitoring_plan, app.report, app.release, app.recommendation to heddle_app;
grant select, insert, update on app.look to heddle_app;
grant select, insert on app.cut, app.download to heddle_app;
grant select on app.allocation_record to heddle_app, heddle_unmasked;
grant insert on app.allocation_record to heddle_unmasked;
grant select on app.cut, app.monitoring_plan, app.look, app.report, app.release to heddle_unmasked;
grant select, update on app.job_run to heddle_unmasked;
-- A copy made on the closed side is announced by the ordinary, neutral mail.
grant insert on app.mail to heddle_unmasked;
grant update (status, error, engine_version, finished_at, version) on app.look to heddle_unmasked;
grant update (status, error, made_at, version) on app.report to heddle_unmasked;
grant update (status, version) on app.release to heddle_unmasked;
`.execute(db);
}
