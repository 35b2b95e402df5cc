import { sql, type Kysely } from 'kysely';

/** Visits in their windows, appointments that cannot collide, contacts, deviations, measurements. */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table app.visit (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	planned_visit_id uuid references app.planned_visit (id),
	name text not null check (length(name) between 1 and 120),
	position integer not null,
	earliest date,
	target date,
	latest date,
	status text not null default 'planned' check (status in ('planned', 'booked', 'under way', 'completed', 'missed', 'not required')),
	happened_on date,
	study_time numeric,
	finished_at timestamptz,
	finished_by uuid references app.person (id),
	missed_reason text check (missed_reason is null or length(btrim(missed_reason)) between 1 and 500),
	version integer not null default 1,
	unique (subject_id, planned_visit_id),
	check (earliest <= target and target <= latest),
	check (status not in ('completed', 'under way') or happened_on is not null or study_time is not null),
	check ((status = 'missed') = (missed_reason is not null))
);
create index visit_open_window on app.visit (site_id, earliest) where status in ('planned', 'booked');
create index visit_open_latest on app.visit (site_id, latest) where status in ('planned', 'booked');
create index visit_subject on app.visit (subject_id, position);
create index visit_study on app.visit (study_id);

create table app.appointment (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	visit_id uuid not null references app.visit (id),
	room_id uuid not null references app.room (id),
	staff_id uuid not null references app.person (id),
	starts_at timestamptz not null,
	ends_at timestamptz not null,
	zone text not null,
	status text not null default 'booked' check (status in ('booked', 'kept', 'cancelled')),
	outside_reason text check (outside_reason is null or length(btrim(outside_reason)) between 1 and 500),
	calendar_uid uuid not null unique,
	calendar_sequence integer not null default 0 check (calendar_sequence >= 0),
	changed_at timestamptz not null default app.now(),
	version integer not null default 1,
	check (ends_at > starts_at and ends_at <= starts_at + interval '12 hours'),
	constraint room_taken exclude using gist (room_id with =, tstzrange(starts_at, ends_at) with &&) where (status = 'booked'),
	constraint staff_taken exclude using gist (staff_id with =, tstzrange(starts_at, ends_at) with &&) where (status = 'booked'),
	constraint subject_taken exclude using gist (subject_id with =, tstzrange(starts_at, ends_at) with &&) where (status = 'booked')
);
create unique index one_open_appointment on app.appointment (visit_id) where status = 'booked';
create index appointment_day on app.appointment (site_id, starts_at);

create table app.contact_attempt (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	visit_id uuid references app.visit (id),
	at timestamptz not null,
	way text not null check (way in ('telephone', 'e-mail', 'letter', 'text message', 'in person')),
	outcome text not null check (outcome in ('reached', 'no answer', 'message left', 'wrong details', 'declined')),
	next_step text check (next_step is null or length(next_step) <= 500),
	try_again_on date,
	by uuid not null references app.person (id),
	version integer not null default 1
);
create index contact_attempt_visit on app.contact_attempt (visit_id, at);
create index contact_attempt_subject on app.contact_attempt (subject_id, at);

create table app.deviation (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	visit_id uuid references app.visit (id),
	category text not null check (category in ('early visit', 'late visit', 'missed visit', 'measure not done', 'other')),
	important boolean not null default false,
	detail text not null check (length(detail) between 1 and 1000),
	found_at timestamptz not null default app.now(),
	version integer not null default 1
);
create unique index deviation_once on app.deviation (visit_id, category) where category in ('early visit', 'late visit', 'missed visit');

create table app.measurement (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	visit_id uuid not null references app.visit (id),
	measure_id uuid not null references app.measure (id),
	value numeric,
	text_value text check (text_value is null or length(text_value) <= 4000),
	readings numeric[],
	unit text not null,
	entered_value numeric,
	entered_unit text,
	entered_readings numeric[],
	not_done_reason text check (not_done_reason is null or length(btrim(not_done_reason)) between 1 and 200),
	soft_answer text check (soft_answer is null or length(btrim(soft_answer)) between 1 and 500),
	comment text check (comment is null or length(comment) <= 1000),
	taken_at timestamptz,
	entered_at timestamptz not null default app.now(),
	taken_by uuid not null references app.person (id),
	source text not null check (source in ('form', 'import', 'derived')),
	version integer not null default 1,
	unique (visit_id, measure_id),
	check (num_nonnulls(value, text_value, not_done_reason) <= 1),
	check (value is null or (value > -1e15 and value < 1e15))
);
create index measurement_subject on app.measurement (subject_id, measure_id);
create index measurement_study on app.measurement (study_id, measure_id);

-- A saved value changes only with a reason; the first entry needs none.
create function app.reason_for_change() returns trigger language plpgsql as $$
begin
	if (new.value, new.text_value, new.readings, new.not_done_reason) is distinct from (old.value, old.text_value, old.readings, old.not_done_reason)
		and (old.value is not null or old.text_value is not null or old.not_done_reason is not null)
		and old.source <> 'derived'
		and btrim(coalesce(current_setting('heddle.reason', true), '')) = '' then
		raise exception using errcode = 'HD004', message = 'REASON_NEEDED';
	end if;
	return new;
end $$;
create trigger measurement_reason before update on app.measurement for each row execute function app.reason_for_change();

create trigger visit_version before update on app.visit for each row execute function app.bump_version();
create trigger appointment_version before update on app.appointment for each row execute function app.bump_version();
create trigger contact_attempt_version before update on app.contact_attempt for each row execute function app.bump_version();
create trigger deviation_version before update on app.deviation for each row execute function app.bump_version();
create trigger measurement_version before update on app.measurement for each row execute function app.bump_version();
create trigger visit_begun after insert on app.visit referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger visit_audit after update or delete on app.visit for each row execute function audit.record_change();
create trigger appointment_audit after insert or update or delete on app.appointment for each row execute function audit.record_change();
create trigger contact_attempt_audit after insert or update or delete on app.contact_attempt for each row execute function audit.record_change();
create trigger deviation_audit after insert or update or delete on app.deviation for each row execute function audit.record_change();
create trigger measurement_begun after insert on app.measurement referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger measurement_audit after update or delete on app.measurement for each row execute function audit.record_change();

grant select, insert, update on app.visit, app.appointment, app.contact_attempt, app.deviation, app.measurement to heddle_app;
grant select on app.visit, app.measurement, app.deviation to heddle_unmasked;
`.execute(db);
}
