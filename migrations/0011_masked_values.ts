import { sql, type Kysely } from 'kysely';

/**
 * Values from which the arm could be guessed are open to one role and kept from everybody masked, in the table and in
 * the trail. The role of the pharmacist, who is not masked. Sites see subjects from the day of their approval on, and
 * not on the days they are closed.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
alter table app.person_role drop constraint person_role_role_check;
alter table app.person_role add constraint person_role_role_check check (role in ('administrator', 'data_manager',
	'coordinator', 'nurse', 'pharmacist', 'investigator', 'monitor', 'auditor', 'statistician', 'independent_statistician', 'board_member'));

alter table app.measure add column open_to text check (open_to in ('pharmacist', 'nurse', 'investigator'));
alter table app.measurement add column open_to text;

-- A value is as open as its measure, from its first row to its last.
create function app.open_as_measure() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
begin
	if tg_op = 'UPDATE' and new.measure_id <> old.measure_id then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	select m.open_to into new.open_to from app.measure m where m.id = new.measure_id;
	return new;
end $$;
create trigger measurement_open_to before insert or update on app.measurement for each row execute function app.open_as_measure();

-- The role named for the value, at the row's site; and who sees closed material anyway.
create function app.may_see(p_open_to text, p_study uuid, p_site uuid) returns boolean
language sql stable security definer set search_path = pg_catalog as $$
	select p_open_to is null or app.has_role(array[p_open_to, 'independent_statistician'], p_study, p_site)
$$;
create policy what_could_reveal_the_arm on app.measurement as restrictive to heddle_app
	using (open_to is null or app.may_see(open_to, study_id, site_id))
	with check (open_to is null or app.may_see(open_to, study_id, site_id));
create policy what_could_reveal_the_arm on audit.event as restrictive for select to heddle_app
	using (record <> 'measurement' or coalesce(after ->> 'open_to', before ->> 'open_to') is null
		or app.may_see(coalesce(after ->> 'open_to', before ->> 'open_to'), study_id, site_id));

-- As before, and a change of such a value says so too, or its event would be open to everybody.
create or replace function audit.record_change() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	secret text[] := coalesce(string_to_array(nullif(tg_argv[0], ''), ','), '{}');
	is_personal boolean := coalesce(tg_argv[1], '') = 'personal';
	is_closed boolean := tg_table_schema = 'closed';
	o jsonb := case when tg_op <> 'INSERT' then to_jsonb(old) end;
	n jsonb := case when tg_op <> 'DELETE' then to_jsonb(new) end;
	row_now jsonb;
	b jsonb; a jsonb; k text; event bigint;
begin
	row_now := coalesce(n, o);
	if tg_op = 'UPDATE' then
		select jsonb_object_agg(key, o -> key), jsonb_object_agg(key, value) into b, a
		from jsonb_each(n) where value is distinct from o -> key and key <> 'version';
		if a is null then return new; end if;
		if row_now ->> 'open_to' is not null then a := jsonb_set(a, '{open_to}', row_now -> 'open_to'); end if;
	else
		b := o; a := n;
	end if;
	foreach k in array secret loop
		if a ? k and a -> k <> 'null'::jsonb then a := jsonb_set(a, array[k], '"[secret]"'); end if;
		if b ? k and b -> k <> 'null'::jsonb then b := jsonb_set(b, array[k], '"[secret]"'); end if;
	end loop;
	event := audit.write(
		case tg_op when 'INSERT' then 'create' when 'UPDATE' then 'change' else 'remove' end,
		tg_table_name::text, coalesce(row_now ->> 'id', row_now ->> 'subject_id'),
		case when tg_table_name = 'study' then row_now ->> 'id' else row_now ->> 'study_id' end::uuid,
		case when tg_table_name = 'site' then row_now ->> 'id' else row_now ->> 'site_id' end::uuid,
		case when tg_table_name = 'subject' then row_now ->> 'id' else row_now ->> 'subject_id' end::uuid,
		is_personal,
		case when is_closed then null else b end, case when is_closed then null else a end);
	if is_closed then
		insert into closed.event (event_id, before, after) values (event, b, a);
	end if;
	return coalesce(new, old);
end $$;

-- Pairs of roles that may not meet in one person. A pharmacist knows what the masked must not know.
create or replace function app.refuse_role_pairs() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	stake text[] := array['investigator', 'statistician', 'independent_statistician', 'board_member'];
	closed_side text[] := array['independent_statistician', 'board_member'];
	masked text[] := array['data_manager', 'coordinator', 'nurse', 'investigator', 'monitor', 'statistician'];
	team text[] := masked || 'pharmacist'::text;
	other app.person_role;
	-- A grant that was taken away counts up to the day on which that happened.
	last_day date := least(new.valid_to, (new.ended_at at time zone 'UTC')::date);
begin
	-- One person's grants are weighed one at a time, or two grants could pass each other.
	perform pg_advisory_xact_lock(hashtext('role:' || new.person_id::text));
	for other in select * from app.person_role r where r.person_id = new.person_id and r.id <> new.id
			and r.valid_from <= coalesce(last_day, 'infinity')
			and coalesce(least(r.valid_to, (r.ended_at at time zone 'UTC')::date), 'infinity') >= greatest(r.valid_from, new.valid_from) loop
		if (new.role = 'administrator' and other.role = any (stake)) or (other.role = 'administrator' and new.role = any (stake)) then
			raise exception using errcode = 'HD003', message = 'ROLE_PAIR', detail = other.role || ',' || new.role;
		end if;
		if (other.study_id is null or new.study_id is null or other.study_id = new.study_id)
			and ((new.role = any (closed_side) and other.role = any (team)) or (other.role = any (closed_side) and new.role = any (team))
				or (new.role = 'pharmacist' and other.role = any (masked)) or (other.role = 'pharmacist' and new.role = any (masked))
				or (new.role = any (closed_side) and other.role = any (closed_side) and new.role <> other.role)) then
			raise exception using errcode = 'HD003', message = 'ROLE_PAIR', detail = other.role || ',' || new.role;
		end if;
	end loop;
	return new;
end $$;

-- A site that was there already has been seeing subjects: it counts as approved since ever.
alter table app.site add column approved_on date default date '1900-01-01';
alter table app.site alter column approved_on drop default;
alter table app.site add column closures jsonb not null default '[]';

grant execute on function app.may_see, app.open_as_measure to heddle_app, heddle_unmasked;
revoke execute on function app.may_see, app.open_as_measure from public;
`.execute(db);
}
