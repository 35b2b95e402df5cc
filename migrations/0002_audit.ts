import { sql, type Kysely } from 'kysely';

/**
 * The audit trail. Triggers write it in the transaction of the change, so no code path can skip it; the
 * application may read it and may not alter it. Values of closed tables stand in closed.event, the open row
 * says only that something happened. Seals chain the trail by hash.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create table audit.event (
	id bigint generated always as identity primary key,
	at timestamptz not null,
	wall_at timestamptz not null default clock_timestamp(),
	xid xid8 not null default pg_current_xact_id(),
	actor uuid not null,
	role text not null,
	request_id text not null,
	action text not null check (action in ('create', 'change', 'remove', 'act', 'refused')),
	record text not null,
	record_id text,
	study_id uuid,
	site_id uuid,
	subject_id uuid,
	personal boolean not null default false,
	before jsonb,
	after jsonb,
	reason text,
	digest bytea not null
);
create index event_study on audit.event (study_id, id desc);
create index event_subject on audit.event (subject_id, id) where subject_id is not null;
create index event_record on audit.event (record, record_id, id);
create index event_actor on audit.event (actor, id desc);

create table closed.event (
	event_id bigint primary key references audit.event (id),
	before jsonb,
	after jsonb
);

create table audit.seal (
	number bigint generated always as identity primary key,
	at timestamptz not null default clock_timestamp(),
	events bigint not null,
	digest bytea not null,
	previous bytea
);
create table audit.sealed (
	event_id bigint primary key references audit.event (id),
	seal bigint not null references audit.seal (number)
);
create index sealed_seal on audit.sealed (seal, event_id);

-- What a row's digest covers, written once so that sealing and verifying cannot disagree.
create function audit.digest_of(e audit.event) returns bytea language sql immutable as $$
	select sha256(convert_to(jsonb_build_array(
		extract(epoch from e.at)::text, extract(epoch from e.wall_at)::text, e.actor, e.role, e.request_id, e.action,
		e.record, e.record_id, e.study_id, e.site_id, e.subject_id, e.personal, e.before, e.after, e.reason)::text, 'UTF8'))
$$;

create function audit.write(
	p_action text, p_record text, p_record_id text, p_study uuid, p_site uuid, p_subject uuid, p_personal boolean,
	p_before jsonb, p_after jsonb
) returns bigint language plpgsql security definer set search_path = pg_catalog as $$
declare
	who uuid := nullif(current_setting('heddle.actor', true), '')::uuid;
	e audit.event;
	made bigint;
begin
	if who is null then
		raise exception using errcode = 'HD001', message = 'A change needs an actor: none is set for this transaction.';
	end if;
	e.at := app.now();
	e.wall_at := clock_timestamp();
	e.actor := who;
	e.role := coalesce(nullif(current_setting('heddle.role', true), ''), 'none');
	e.request_id := coalesce(nullif(current_setting('heddle.request', true), ''), 'none');
	e.action := p_action;
	e.record := p_record;
	e.record_id := p_record_id;
	e.study_id := p_study;
	e.site_id := p_site;
	e.subject_id := p_subject;
	e.personal := p_personal;
	e.before := p_before;
	e.after := p_after;
	e.reason := nullif(current_setting('heddle.reason', true), '');
	insert into audit.event (at, wall_at, actor, role, request_id, action, record, record_id, study_id, site_id,
		subject_id, personal, before, after, reason, digest)
	values (e.at, e.wall_at, e.actor, e.role, e.request_id, e.action, e.record, e.record_id, e.study_id, e.site_id,
		e.subject_id, e.personal, e.before, e.after, e.reason, audit.digest_of(e))
	returning id into made;
	return made;
end $$;

-- Arguments: columns whose values are secrets (comma separated), and 'personal' where values identify a person.
create function audit.record_change() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
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

-- The same for rows that come in by the thousand: one statement's new rows, each with its own event. For tables that hold
-- no secret and name no person.
create function audit.record_inserts() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	who uuid := nullif(current_setting('heddle.actor', true), '')::uuid;
	acting text := coalesce(nullif(current_setting('heddle.role', true), ''), 'none');
	request text := coalesce(nullif(current_setting('heddle.request', true), ''), 'none');
	why text := nullif(current_setting('heddle.reason', true), '');
	told timestamptz := app.now();
	wall timestamptz := clock_timestamp();
	kind text := tg_table_name;
begin
	if who is null then
		raise exception using errcode = 'HD001', message = 'A change needs an actor: none is set for this transaction.';
	end if;
	insert into audit.event (at, wall_at, actor, role, request_id, action, record, record_id, study_id, site_id,
		subject_id, personal, before, after, reason, digest)
	select told, wall, who, acting, request, 'create', kind, e.record_id, e.study_id, e.site_id, e.subject_id, false, null,
		e.after, why, audit.digest_of(row(null, told, wall, null, who, acting, request, 'create', kind, e.record_id,
			e.study_id, e.site_id, e.subject_id, false, null, e.after, why, null)::audit.event)
	from (
		select j as after, j ->> 'id' as record_id, (j ->> 'study_id')::uuid as study_id, (j ->> 'site_id')::uuid as site_id,
			(case when kind = 'subject' then j ->> 'id' else j ->> 'subject_id' end)::uuid as subject_id
		-- Each row is turned into JSON once: without the offsets it would be at every mention.
		from (select to_jsonb(f) as j from fresh f offset 0) as rows offset 0
	) as e;
	return null;
end $$;

-- An act that changes no row but must stand in the trail: a download, an export, a reading of closed material.
create function audit.act(p_record text, p_record_id text, p_study uuid, p_site uuid, p_subject uuid, p_detail jsonb)
returns bigint language sql security definer set search_path = pg_catalog as
	$$ select audit.write('act', p_record, p_record_id, p_study, p_site, p_subject, false, null, p_detail) $$;

create function audit.refuse(p_capability text, p_study uuid, p_site uuid, p_detail jsonb)
returns bigint language sql security definer set search_path = pg_catalog as
	$$ select audit.write('refused', p_capability, null, p_study, p_site, null, false, null, p_detail) $$;

-- Seals every event whose transaction is certainly over and that no seal covers yet.
create function audit.seal_now() returns bigint language plpgsql security definer set search_path = pg_catalog as $$
declare
	prior bytea; total bigint; chained bytea; made bigint;
begin
	perform pg_advisory_xact_lock(7203001);
	create temporary table fresh on commit drop as
		select e.id, e.digest from audit.event e left join audit.sealed s on s.event_id = e.id
		where s.event_id is null
			and (e.xid < pg_snapshot_xmin(pg_current_snapshot()) or e.xid > pg_snapshot_xmax(pg_current_snapshot()));
	select count(*) into total from fresh;
	if total = 0 then drop table fresh; return 0; end if;
	select digest into prior from audit.seal order by number desc limit 1;
	select sha256(coalesce(prior, ''::bytea) || string_agg(int8send(id) || digest, ''::bytea order by id)) into chained from fresh;
	insert into audit.seal (events, digest, previous) values (total, chained, prior) returning number into made;
	insert into audit.sealed (event_id, seal) select id, made from fresh;
	drop table fresh;
	return total;
end $$;

-- One row for each break found; no row means that the whole trail holds.
create function audit.verify() returns table (seal bigint, event_id bigint, what text)
language plpgsql security definer set search_path = pg_catalog as $$
#variable_conflict use_column
begin
	return query
		select s.seal, e.id, 'the row was altered after it was written' from audit.event e
		left join audit.sealed s on s.event_id = e.id where e.digest <> audit.digest_of(e) order by e.id;
	return query
		select s.seal, s.event_id, 'the row is missing' from audit.sealed s
		left join audit.event e on e.id = s.event_id where e.id is null order by s.event_id;
	return query
		with chain as (
			select k.number, k.events, k.digest, k.previous, lag(k.digest) over (order by k.number) as should_follow,
				count(e.id) as found,
				sha256(coalesce(k.previous, ''::bytea) || coalesce(string_agg(int8send(e.id) || e.digest, ''::bytea order by e.id), ''::bytea)) as again
			from audit.seal k left join audit.sealed s on s.seal = k.number left join audit.event e on e.id = s.event_id
			group by k.number
		)
		select number, null::bigint, case
			when found <> events then format('%s of %s sealed rows are missing', events - found, events)
			when previous is distinct from should_follow then 'the seal does not follow the one before it'
			else 'the sealed rows are not the ones that were sealed' end
		from chain where found <> events or again <> digest or previous is distinct from should_follow order by number;
end $$;

-- How much there is, how much of it is sealed, and the newest seal: written down elsewhere, it proves what stood before.
create function audit.state() returns table (events bigint, sealed bigint, seals bigint, head text)
language sql stable security definer set search_path = pg_catalog as $$
	select (select count(*) from audit.event), (select count(*) from audit.sealed), (select count(*) from audit.seal),
		(select number || ':' || encode(digest, 'hex') from audit.seal order by number desc limit 1)
$$;

-- A seal's rows may not lose their event even for the owner: the trail refuses change from every side.
create function audit.never() returns trigger language plpgsql as $$
begin
	raise exception using errcode = 'HD002', message = 'The audit trail cannot be altered.';
end $$;
create trigger event_is_kept before update or delete on audit.event for each row execute function audit.never();
create trigger event_is_kept_whole before truncate on audit.event execute function audit.never();
create trigger seal_is_kept before update or delete on audit.seal for each row execute function audit.never();
create trigger sealed_is_kept before update or delete on audit.sealed for each row execute function audit.never();
create trigger closed_event_is_kept before update or delete on closed.event for each row execute function audit.never();

revoke all on all functions in schema audit from public;
grant execute on function audit.act, audit.refuse, audit.seal_now, audit.verify, audit.state to heddle_app, heddle_unmasked;
grant select on audit.event, audit.seal to heddle_app, heddle_unmasked;
grant select on closed.event to heddle_unmasked;
`.execute(db);
}
