import { sql, type Kysely } from 'kysely';

/** Accounts, the roles granted to them (the delegation log), sessions, single-use links, and app.enter(). */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table app.person (
	id uuid primary key,
	kind text not null default 'person' check (kind in ('person', 'system')),
	email text not null check (email = lower(email) and length(email) <= 254),
	name text not null check (length(btrim(name)) between 1 and 120),
	password_hash text,
	language text not null default 'en' check (language in ('en', 'de')),
	active boolean not null default true,
	created_at timestamptz not null default app.now(),
	version integer not null default 1
);
create unique index person_email on app.person (email);
insert into app.person (id, kind, email, name)
values ('00000000-0000-7000-8000-000000000001', 'system', 'system@heddle.invalid', 'Heddle');

create table app.study (
	id uuid primary key,
	code text not null check (length(code) between 1 and 20),
	name text not null check (length(name) between 1 and 200),
	masked boolean not null,
	training boolean not null default false,
	status text not null default 'draft' check (status in ('draft', 'open', 'ended')),
	created_at timestamptz not null default app.now(),
	version integer not null default 1
);
create unique index study_code on app.study (lower(code));

create table app.site (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	code text not null check (code ~ '^[0-9]{2}$'),
	name text not null check (length(name) between 1 and 120),
	zone text not null,
	opening jsonb not null default '[]',
	version integer not null default 1,
	unique (study_id, code),
	unique (study_id, id)
);

create table app.person_role (
	id uuid primary key,
	person_id uuid not null references app.person (id),
	role text not null check (role in ('administrator', 'data_manager', 'coordinator', 'nurse', 'investigator', 'monitor',
		'auditor', 'statistician', 'independent_statistician', 'board_member')),
	study_id uuid references app.study (id),
	site_id uuid references app.site (id),
	valid_from date not null,
	valid_to date check (valid_to is null or valid_to >= valid_from),
	granted_by uuid not null references app.person (id),
	granted_at timestamptz not null default app.now(),
	confirmed_by uuid references app.person (id),
	confirmed_at timestamptz,
	-- Taken away at once, before its last day.
	ended_at timestamptz,
	version integer not null default 1,
	check (site_id is null or study_id is not null),
	check (role <> 'administrator' or study_id is null),
	check (role in ('administrator', 'data_manager') or study_id is not null),
	check (confirmed_by is null or confirmed_by <> granted_by),
	check (granted_by <> person_id and (confirmed_by is null or confirmed_by <> person_id))
);
create index person_role_person on app.person_role (person_id);
create index person_role_study on app.person_role (study_id);

create table app.session (
	id uuid primary key,
	person_id uuid not null references app.person (id),
	method text not null check (method in ('password', 'sso')),
	started_at timestamptz not null default clock_timestamp(),
	seen_at timestamptz not null default clock_timestamp(),
	locked_at timestamptz,
	ended_at timestamptz,
	device text not null default '',
	version integer not null default 1
);
create index session_person on app.session (person_id) where ended_at is null;

create table app.link (
	id uuid primary key,
	person_id uuid references app.person (id),
	purpose text not null check (purpose in ('invitation', 'reset', 'set-up')),
	token_hash bytea not null unique,
	created_at timestamptz not null default clock_timestamp(),
	expires_at timestamptz not null,
	used_at timestamptz,
	version integer not null default 1
);

create table app.rate_limit (
	key varchar(255) primary key,
	points integer not null default 0,
	expire bigint
);

-- Whether a grant is in force: begun, not ended, and confirmed by a second person where the role opens closed material.
create function app.in_force(r app.person_role, today date) returns boolean language sql immutable as $$
	select r.ended_at is null and r.valid_from <= today and (r.valid_to is null or r.valid_to >= today)
		and (r.role not in ('independent_statistician', 'board_member') or r.confirmed_by is not null)
$$;

create function app.has_role(p_roles text[], p_study uuid, p_site uuid) returns boolean
language sql stable security definer set search_path = pg_catalog as $$
	select exists (
		select from app.person_role r join app.person p on p.id = r.person_id
		where r.person_id = app.actor() and p.active and r.role = any (p_roles)
			and (r.study_id is null or r.study_id = p_study)
			and (r.site_id is null or p_site is null or r.site_id = p_site)
			and app.in_force(r, (app.now() at time zone 'UTC')::date))
$$;

-- Sets who is asking for this transaction, and from the grants in force which studies and sites may be seen.
create function app.enter(p_actor uuid, p_role text, p_request text, p_reason text, p_clock text) returns void
language plpgsql security definer set search_path = pg_catalog as $$
declare
	today date; studies uuid[]; sites uuid[]; all_of_them boolean; who app.person;
begin
	perform set_config('heddle.clock', coalesce(p_clock, ''), true);
	today := (app.now() at time zone 'UTC')::date;
	select * into who from app.person where id = p_actor and active;
	if not found then
		raise exception using errcode = 'HD001', message = 'This account cannot act: it is unknown or switched off.';
	end if;
	all_of_them := who.kind = 'system';
	if all_of_them then
		studies := '{}'; sites := '{}';
	else
		select coalesce(bool_or(r.role = 'data_manager' and r.study_id is null), false) into all_of_them
			from app.person_role r where r.person_id = p_actor and app.in_force(r, today);
		select coalesce(array_agg(distinct r.study_id) filter (where r.study_id is not null), '{}') into studies
			from app.person_role r where r.person_id = p_actor and app.in_force(r, today);
		select coalesce(array_agg(distinct s.id), '{}') into sites
			from app.person_role r join app.site s on s.study_id = r.study_id and (r.site_id is null or r.site_id = s.id)
			where r.person_id = p_actor and app.in_force(r, today);
	end if;
	perform set_config('heddle.actor', p_actor::text, true);
	perform set_config('heddle.role', coalesce(p_role, ''), true);
	perform set_config('heddle.request', coalesce(p_request, ''), true);
	perform set_config('heddle.reason', coalesce(p_reason, ''), true);
	perform set_config('heddle.everywhere', case when all_of_them then 'on' else '' end, true);
	perform set_config('heddle.studies', studies::text, true);
	perform set_config('heddle.sites', sites::text, true);
end $$;

-- Pairs of roles that may not meet in one person: an administrator has no stake in the results, and whoever may see
-- closed material holds no role in the study's team.
create function app.refuse_role_pairs() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	stake text[] := array['investigator', 'statistician', 'independent_statistician', 'board_member'];
	closed_side text[] := array['independent_statistician', 'board_member'];
	team text[] := array['data_manager', 'coordinator', 'nurse', 'investigator', 'monitor', 'statistician'];
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
				or (new.role = any (closed_side) and other.role = any (closed_side) and new.role <> other.role)) then
			raise exception using errcode = 'HD003', message = 'ROLE_PAIR', detail = other.role || ',' || new.role;
		end if;
	end loop;
	return new;
end $$;
create trigger role_pairs before insert or update on app.person_role for each row execute function app.refuse_role_pairs();

-- A grant is in the hand of who gives it, and is never turned into another: it ends, and a new one is given.
create function app.keep_grant() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	by_heddle boolean := exists (select from app.person p where p.id = app.actor() and p.kind = 'system');
begin
	if tg_op = 'INSERT' then
		if new.granted_by <> app.actor() and not by_heddle then
			raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
		end if;
		if new.confirmed_by is not null and not by_heddle then
			raise exception using errcode = 'HD006', message = 'SECOND_PERSON';
		end if;
		return new;
	end if;
	if (new.id, new.person_id, new.role, new.study_id, new.site_id, new.valid_from, new.granted_by, new.granted_at)
		is distinct from (old.id, old.person_id, old.role, old.study_id, old.site_id, old.valid_from, old.granted_by, old.granted_at)
		or (old.confirmed_by is not null and (new.confirmed_by, new.confirmed_at) is distinct from (old.confirmed_by, old.confirmed_at))
		or (old.ended_at is not null and new.ended_at is distinct from old.ended_at) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	if new.confirmed_by is distinct from old.confirmed_by and new.confirmed_by is distinct from app.actor() then
		raise exception using errcode = 'HD006', message = 'SECOND_PERSON';
	end if;
	return new;
end $$;
create trigger keep_grant before insert or update on app.person_role for each row execute function app.keep_grant();

-- The names of studies and sites, for who grants roles in them and by that sees nothing else of them.
create function app.places() returns table (study_id uuid, study_code text, study_name text, site_id uuid, site_code text, site_name text)
language sql stable security definer set search_path = pg_catalog as $$
	select s.id, s.code, s.name, t.id, t.code, t.name from app.study s left join app.site t on t.study_id = s.id
	where app.has_role(array['administrator'], null, null) order by s.code, t.code
$$;

-- True once: for who sets Heddle up. The first administrator is made in the same transaction.
create function app.mark_set_up() returns boolean language plpgsql security definer set search_path = pg_catalog as $$
begin
	update app.installation set set_up_at = app.now() where set_up_at is null
		and not exists (select from app.person_role where role = 'administrator');
	return found;
end $$;

create aggregate app.folded(jsonb) (sfunc = jsonb_concat, stype = jsonb, initcond = '{}');

-- Who held which role at an instant, told from the trail alone, so that later changes do not reach back.
create function app.access_at(p_at timestamptz) returns table (
	person_id uuid, name text, email text, active boolean, role text, study text, site text,
	valid_from date, valid_to date, granted_by text, granted_at timestamptz, confirmed_by text, in_force boolean)
language plpgsql stable security definer set search_path = pg_catalog as $$
begin
	if not app.has_role(array['administrator'], null, null) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	return query
	with told as (
		select e.record, e.record_id, app.folded(e.after order by e.id) as v from audit.event e
		where e.record in ('person', 'person_role') and e.action in ('create', 'change') and e.at <= p_at
		group by e.record, e.record_id
	), people as (select * from jsonb_populate_recordset(null::app.person, (select jsonb_agg(v) from told where record = 'person'))
	), grants as (select * from jsonb_populate_recordset(null::app.person_role, (select jsonb_agg(v) from told where record = 'person_role')))
	select p.id, p.name, p.email, p.active, g.role, s.code, t.code, g.valid_from, g.valid_to, by.name, g.granted_at, c.name,
		coalesce(p.active and app.in_force(row(g.*)::app.person_role, (p_at at time zone 'UTC')::date), false)
	from people p
	left join grants g on g.person_id = p.id
	left join app.study s on s.id = g.study_id left join app.site t on t.id = g.site_id
	left join app.person by on by.id = g.granted_by left join app.person c on c.id = g.confirmed_by
	where p.kind = 'person' order by lower(p.name), p.id, g.granted_at;
end $$;

create trigger person_version before update on app.person for each row execute function app.bump_version();
create trigger person_role_version before update on app.person_role for each row execute function app.bump_version();
create trigger study_version before update on app.study for each row execute function app.bump_version();
create trigger site_version before update on app.site for each row execute function app.bump_version();

create trigger person_audit after insert or update or delete on app.person for each row execute function audit.record_change('password_hash');
create trigger person_role_audit after insert or update or delete on app.person_role for each row execute function audit.record_change();
create trigger study_audit after insert or update or delete on app.study for each row execute function audit.record_change();
create trigger site_audit after insert or update or delete on app.site for each row execute function audit.record_change();
create trigger link_audit after insert or update or delete on app.link for each row execute function audit.record_change('token_hash');
-- Being seen is not a change worth a row each minute; starting, locking and ending are.
create trigger session_begun after insert on app.session for each row execute function audit.record_change();
create trigger session_audit after update on app.session for each row
	when (old.locked_at is distinct from new.locked_at or old.ended_at is distinct from new.ended_at)
	execute function audit.record_change();

grant select, insert, update on app.person, app.person_role, app.study, app.site, app.session, app.link to heddle_app;
grant select, insert, update, delete on app.rate_limit to heddle_app;
grant select on app.person, app.person_role, app.study, app.site to heddle_unmasked;
grant execute on function app.enter, app.has_role, app.in_force to heddle_app, heddle_unmasked;
`.execute(db);
}
