import { sql, type Kysely } from 'kysely';

/**
 * Closed material: lists, arms, by-arm requests and results, closed reports. The application holds no right to read any
 * of these tables; it asks through functions that check who is asking, leave an audit row, and give back one item.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table closed.allocation_list (
	id uuid primary key,
	study_id uuid not null unique references app.study (id),
	seed text not null,
	block_sizes integer[] not null,
	method text not null,
	hash text not null,
	made_at timestamptz not null default app.now()
);
create table closed.list_position (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	list_id uuid not null references closed.allocation_list (id),
	stratum jsonb not null,
	position integer not null,
	arm_key text not null,
	kit_number text not null,
	subject_id uuid unique references app.subject (id),
	used_at timestamptz,
	unique (list_id, stratum, position),
	unique (study_id, kit_number)
);
create index list_position_free on closed.list_position (list_id, stratum, position) where subject_id is null;
create table closed.arm_letter (
	study_id uuid not null references app.study (id),
	arm_key text not null,
	letter text not null check (letter ~ '^[A-Z]$'),
	primary key (study_id, arm_key),
	unique (study_id, letter)
);
create table closed.cut_allocation (
	cut_id uuid primary key references app.cut (id),
	study_id uuid not null references app.study (id),
	content jsonb not null,
	hash text not null
);
create table closed.look_request (
	look_id uuid primary key references app.look (id),
	study_id uuid not null references app.study (id),
	spec jsonb not null
);
create table closed.look_result (
	look_id uuid primary key references app.look (id),
	study_id uuid not null references app.study (id),
	result jsonb not null,
	input_hash text not null,
	made_at timestamptz not null default app.now()
);
create table closed.closed_report (
	report_id uuid primary key references app.report (id),
	study_id uuid not null references app.study (id),
	storage_key text not null,
	file_key bytea not null,
	sha256 text not null
);
create table closed.released_copy (
	release_id uuid primary key references app.release (id),
	study_id uuid not null references app.study (id),
	person_id uuid not null references app.person (id),
	storage_key text not null,
	file_key bytea not null,
	sha256 text not null
);

create trigger allocation_list_audit after insert or update or delete on closed.allocation_list for each row execute function audit.record_change('seed');
-- The list's own row carries the hash of every position; only the use of a position is an event.
create trigger list_position_audit after update or delete on closed.list_position for each row execute function audit.record_change();
create trigger arm_letter_audit after insert or update or delete on closed.arm_letter for each row execute function audit.record_change();
create trigger look_request_audit after insert or update or delete on closed.look_request for each row execute function audit.record_change();
create trigger look_result_audit after insert or update or delete on closed.look_result for each row execute function audit.record_change('result');
create trigger closed_report_audit after insert or update or delete on closed.closed_report for each row execute function audit.record_change('file_key');
create trigger released_copy_audit after insert or update or delete on closed.released_copy for each row execute function audit.record_change('file_key');

-- The next kit of the subject's stratum, once. Whatever is wrong with the list, the answer is the same.
create function closed.allocate(p_subject uuid) returns text language plpgsql security definer set search_path = pg_catalog as $$
declare
	s app.subject; place closed.list_position; zone text; at timestamptz := app.now();
begin
	select * into s from app.subject where id = p_subject for update;
	if not found or not app.has_role(array['coordinator', 'investigator'], s.study_id, s.site_id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	if s.kit_number is not null then
		raise exception using errcode = 'HD011', message = 'ALREADY_RANDOMISED';
	end if;
	if not exists (select from app.consent c where c.subject_id = s.id and c.signed_at <= at) then
		raise exception using errcode = 'HD012', message = 'CONSENT_NEEDED';
	end if;
	if exists (select from app.study_exit e where e.subject_id = s.id) then
		raise exception using errcode = 'HD014', message = 'LEFT_STUDY';
	end if;
	-- One at a time within a stratum, or two callers would see the same first free position.
	perform pg_advisory_xact_lock(hashtextextended('allocate:' || s.study_id::text || s.stratum::text, 0));
	select l.* into place from closed.list_position l
		where l.study_id = s.study_id and l.stratum = s.stratum and l.subject_id is null order by l.position limit 1;
	if not found then
		raise exception using errcode = 'HD013', message = 'ALLOCATION_UNAVAILABLE';
	end if;
	update closed.list_position set subject_id = s.id, used_at = at where id = place.id;
	select t.zone into zone from app.site t where t.id = s.site_id;
	update app.subject set kit_number = place.kit_number, randomised_at = at, randomised_on = (at at time zone zone)::date where id = s.id;
	return place.kit_number;
end $$;

-- Freezes the allocations known at the cut's instant beside the cut; gives back only their hash.
create function closed.freeze_allocation(p_cut uuid) returns text language plpgsql security definer set search_path = pg_catalog as $$
declare
	c app.cut; held jsonb; h text;
begin
	select * into c from app.cut where id = p_cut;
	if not found or not app.has_role(array['data_manager', 'statistician', 'independent_statistician'], c.study_id, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select coalesce(jsonb_object_agg(l.subject_id, l.arm_key), '{}') into held from closed.list_position l
		where l.study_id = c.study_id and l.subject_id is not null and l.used_at <= c.cut_off_at;
	h := encode(sha256(convert_to(held::text, 'UTF8')), 'hex');
	insert into closed.cut_allocation (cut_id, study_id, content, hash) values (c.id, c.study_id, held, h);
	return h;
end $$;

create function closed.request_look(p_look uuid, p_spec jsonb) returns void language plpgsql security definer set search_path = pg_catalog as $$
declare k app.look;
begin
	select * into k from app.look where id = p_look;
	if not found or k.kind <> 'by arm' or k.status <> 'waiting' or not app.has_role(array['independent_statistician'], k.study_id, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	insert into closed.look_request (look_id, study_id, spec) values (k.id, k.study_id, p_spec);
end $$;

-- One by-arm look, question and answer, for the independent statistician of its study; the reading stands in the trail.
create function closed.read_look(p_look uuid) returns jsonb language plpgsql security definer set search_path = pg_catalog as $$
declare k app.look; found_it jsonb;
begin
	select * into k from app.look where id = p_look;
	if not found or not app.has_role(array['independent_statistician'], k.study_id, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select jsonb_build_object('spec', q.spec, 'result', r.result, 'inputHash', r.input_hash) into found_it
		from closed.look_request q left join closed.look_result r on r.look_id = q.look_id where q.look_id = k.id;
	perform audit.act('look_result', k.id::text, k.study_id, null, null, '{"read": true}');
	return found_it;
end $$;

-- Where one person's copy of a closed report lies and the key that opens it, for that person alone.
create function closed.open_copy(p_release uuid) returns table (storage_key text, file_key bytea, sha256 text)
language plpgsql security definer set search_path = pg_catalog as $$
declare r app.release;
begin
	select * into r from app.release where id = p_release;
	if not found or r.person_id <> app.actor() or r.status <> 'ready'
		or not app.has_role(array['board_member', 'independent_statistician'], r.study_id, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	perform audit.act('closed_report', r.report_id::text, r.study_id, null, null, jsonb_build_object('release', r.id, 'opened', true));
	return query select c.storage_key, c.file_key, c.sha256 from closed.released_copy c where c.release_id = r.id and c.person_id = app.actor();
end $$;

create function closed.open_report(p_report uuid) returns table (storage_key text, file_key bytea, sha256 text)
language plpgsql security definer set search_path = pg_catalog as $$
declare r app.report;
begin
	select * into r from app.report where id = p_report;
	if not found or r.kind <> 'closed' or not app.has_role(array['independent_statistician'], r.study_id, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	perform audit.act('closed_report', r.id::text, r.study_id, null, null, '{"opened": true}');
	return query select c.storage_key, c.file_key, c.sha256 from closed.closed_report c where c.report_id = r.id;
end $$;

revoke all on all functions in schema closed from public;
grant execute on function closed.allocate, closed.freeze_allocation, closed.request_look, closed.read_look, closed.open_copy, closed.open_report to heddle_app;
grant select on all tables in schema closed to heddle_unmasked;
grant insert on closed.allocation_list, closed.list_position, closed.arm_letter, closed.look_result, closed.closed_report, closed.released_copy to heddle_unmasked;
`.execute(db);
}
