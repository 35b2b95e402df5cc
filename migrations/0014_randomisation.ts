import { sql, type Kysely } from 'kysely';

/**
 * Randomisation beyond one list: minimisation, kits in stock at the sites, arms of open-label studies, and unmasking.
 * What belongs to an arm stays in the closed schema; the open tables hold what anybody of the study may know.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await lists(db);
	await minimisation(db);
	await stock(db);
	await openLabel(db);
	await unmasking(db);
	await allocate(db);
}

/** What the list was made from, so that it can be made again whatever the protocol says by then. */
const lists = (db: Kysely<unknown>) =>
	sql`
alter table closed.allocation_list add column plan jsonb not null default '{}';

-- The list with its seed, for the independent statistician's own program; the web server may not ask.
create function closed.read_list(p_study uuid) returns jsonb language plpgsql security definer set search_path = pg_catalog as $$
declare l closed.allocation_list; found_it jsonb;
begin
	if not app.has_role(array['independent_statistician'], p_study, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select * into l from closed.allocation_list a where a.study_id = p_study;
	if not found then
		return null;
	end if;
	select jsonb_build_object('seed', l.seed, 'blockSizes', to_jsonb(l.block_sizes), 'method', l.method, 'hash', l.hash,
		'plan', l.plan, 'madeAt', l.made_at,
		'places', coalesce((select jsonb_agg(jsonb_build_object('stratum', p.stratum, 'position', p.position, 'arm', p.arm_key,
			'kit', p.kit_number, 'used', p.subject_id is not null) order by p.id) from closed.list_position p where p.list_id = l.id), '[]'),
		'chances', coalesce((select jsonb_agg(jsonb_build_object('position', c.position, 'coin', c.coin, 'draw', c.draw,
			'levels', c.levels, 'arm', c.arm_key) order by c.position) from closed.chance c where c.list_id = l.id), '[]')) into found_it;
	perform audit.act('allocation_list', l.id::text, p_study, null, null, '{"read": true}');
	return found_it;
end $$;
revoke all on function closed.read_list from public;
grant execute on function closed.read_list to heddle_unmasked;
`.execute(db);

const minimisation = (db: Kysely<unknown>) =>
	sql`
-- The chance of the favoured arm, as the independent statistician chose it before the list was made.
create table closed.minimisation_choice (
	study_id uuid primary key references app.study (id),
	best_chance numeric(3, 2) not null check (best_chance between 0.55 and 0.95),
	chosen_by uuid not null references app.person (id),
	chosen_at timestamptz not null default app.now()
);
create table closed.minimisation (
	list_id uuid primary key references closed.allocation_list (id),
	study_id uuid not null unique references app.study (id),
	-- [{"key", "ratio"}, …] in the order in which draws go through them.
	arms jsonb not null,
	best_chance numeric(3, 2) not null,
	-- A coin below this draws the arm in the study's ratio, whatever the balance.
	random_below bigint not null check (random_below between 0 and 4294967296)
);
-- Two random numbers for each allocation to come, 0 to 2³² − 1, and what became of them.
create table closed.chance (
	list_id uuid not null references closed.allocation_list (id),
	study_id uuid not null references app.study (id),
	position integer not null check (position >= 1),
	coin bigint not null,
	draw bigint not null,
	subject_id uuid unique references app.subject (id),
	used_at timestamptz,
	levels jsonb,
	arm_key text,
	primary key (list_id, position),
	check ((subject_id is null) = (arm_key is null) and (subject_id is null) = (levels is null))
);
create index chance_free on closed.chance (list_id, position) where subject_id is null;
create index chance_used on closed.chance (list_id, arm_key) where subject_id is not null;
create index list_position_kit on closed.list_position (list_id, arm_key, position) where subject_id is null;

create trigger minimisation_choice_audit after insert or update or delete on closed.minimisation_choice for each row execute function audit.record_change();
create trigger minimisation_audit after insert or update or delete on closed.minimisation for each row execute function audit.record_change();
-- As with the list's places: their making is one event, the list's own; their use is an event each.
create trigger chance_audit after update or delete on closed.chance for each row execute function audit.record_change();

create function closed.choose_chance(p_study uuid, p_best numeric) returns void language plpgsql security definer set search_path = pg_catalog as $$
begin
	if not app.has_role(array['independent_statistician'], p_study, null) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	if exists (select from closed.allocation_list l where l.study_id = p_study) then
		raise exception using errcode = 'HD015', message = 'LIST_EXISTS';
	end if;
	insert into closed.minimisation_choice (study_id, best_chance, chosen_by) values (p_study, p_best, app.actor())
	on conflict (study_id) do update set best_chance = excluded.best_chance, chosen_by = excluded.chosen_by, chosen_at = app.now();
end $$;

/*
 * The arm that minimisation gives to a subject with these levels. For each arm it is asked how far apart the arms would be
 * at the subject's level of each factor, in numbers divided by the ratio (range); the factors' sums decide, each weighing the
 * same. 2520 is the least common multiple of 1 to 10, so that nothing is rounded. Without factors the totals count.
 */
create function closed.minimised_arm(p_list uuid, p_levels jsonb, p_coin bigint, p_draw bigint) returns text
language plpgsql stable security definer set search_path = pg_catalog as $$
declare
	m closed.minimisation; chosen text;
begin
	select * into strict m from closed.minimisation where list_id = p_list;
	with arms as (
		select a.value ->> 'key' as key, (a.value ->> 'ratio')::bigint as ratio, a.ordinality as place
		from jsonb_array_elements(m.arms) with ordinality a
	), factors as (
		select f.key as factor, f.value as level
		from jsonb_each_text(case when p_levels = '{}'::jsonb then '{"": ""}'::jsonb else p_levels end) f
	), counted as (
		select f.factor, a.key as arm, a.ratio, count(c.subject_id) as held
		from factors f cross join arms a
		left join closed.chance c on c.list_id = p_list and c.subject_id is not null and c.arm_key = a.key
			and (f.factor = '' or c.levels ->> f.factor = f.level)
		group by f.factor, a.key, a.ratio
	), tried as (
		select t.key, c.factor,
			max((c.held + (c.arm = t.key)::int) * (2520 / c.ratio)) - min((c.held + (c.arm = t.key)::int) * (2520 / c.ratio)) as apart
		from arms t cross join counted c group by t.key, c.factor
	), judged as (
		select a.key, a.ratio, a.place, sum(t.apart) as apart from tried t join arms a on a.key = t.key group by a.key, a.ratio, a.place
	), pool as (
		select j.key, j.place, sum(j.ratio) over (order by j.place) as upto, sum(j.ratio) over () as total
		from judged j where p_coin < m.random_below or j.apart = (select min(apart) from judged)
	)
	select p.key into strict chosen from pool p where p.upto > ((p_draw * p.total::bigint) >> 32) order by p.place limit 1;
	return chosen;
end $$;

revoke all on function closed.choose_chance, closed.minimised_arm from public;
grant execute on function closed.choose_chance to heddle_app;
grant select on closed.minimisation_choice, closed.minimisation, closed.chance to heddle_unmasked;
grant insert on closed.minimisation, closed.chance to heddle_unmasked;
`.execute(db);

/**
 * Kits. A site holds each arm's kits up to a level in the study's ratio, and a delivery tops up to that level. So the number
 * delivered follows from the number that is there, over all arms; and as long as fewer kits are gone than the smallest arm's
 * level, every arm is certainly there. Nothing that a site can see or be refused depends on which arm went out.
 */
const stock = (db: Kysely<unknown>) =>
	sql`
create table app.kit_plan (
	study_id uuid primary key references app.study (id),
	-- Days for which a kit must still be good when it is given out.
	use_days integer not null check (use_days between 0 and 1100),
	version integer not null default 1
);
create table app.kit_level (
	site_id uuid primary key,
	study_id uuid not null references app.study (id),
	full_stock integer not null check (full_stock between 2 and 5000),
	resupply_at integer not null check (resupply_at >= 1 and resupply_at < full_stock),
	-- When the low stock was told; none while there is enough.
	told_at timestamptz,
	version integer not null default 1,
	foreign key (study_id, site_id) references app.site (study_id, id)
);
create table app.kit_delivery (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null,
	number integer not null check (number >= 1),
	kits integer not null check (kits >= 1),
	expires_on date not null,
	sent_by uuid not null references app.person (id),
	sent_at timestamptz not null default app.now(),
	received_by uuid references app.person (id),
	received_at timestamptz,
	version integer not null default 1,
	unique (site_id, number),
	foreign key (study_id, site_id) references app.site (study_id, id),
	check ((received_by is null) = (received_at is null))
);
create table app.kit (
	study_id uuid not null references app.study (id),
	kit_number text not null,
	site_id uuid not null,
	delivery_id uuid not null references app.kit_delivery (id),
	expires_on date not null,
	status text not null default 'on the way' check (status in ('on the way', 'in stock', 'given', 'damaged', 'lost')),
	note text check (note is null or length(note) between 1 and 300),
	subject_id uuid references app.subject (id),
	version integer not null default 1,
	primary key (study_id, kit_number),
	foreign key (study_id, site_id) references app.site (study_id, id),
	check ((status = 'given') = (subject_id is not null))
);
create index kit_site on app.kit (site_id, status);

create trigger kit_plan_version before update on app.kit_plan for each row execute function app.bump_version();
create trigger kit_level_version before update on app.kit_level for each row execute function app.bump_version();
create trigger kit_delivery_version before update on app.kit_delivery for each row execute function app.bump_version();
create trigger kit_version before update on app.kit for each row execute function app.bump_version();
create trigger kit_plan_audit after insert or update or delete on app.kit_plan for each row execute function audit.record_change();
create trigger kit_level_audit after insert or update or delete on app.kit_level for each row execute function audit.record_change();
create trigger kit_delivery_audit after insert or update or delete on app.kit_delivery for each row execute function audit.record_change();
create trigger kit_audit after insert or update or delete on app.kit for each row execute function audit.record_change();

-- A kit is put in by a delivery and given by an allocation; people say what became of it otherwise.
create function app.keep_kit() returns trigger language plpgsql as $$
begin
	if current_user = 'heddle_app' and (new.status = 'given' or old.status = 'given'
		or (new.study_id, new.kit_number, new.site_id, new.delivery_id, new.expires_on, new.subject_id)
			is distinct from (old.study_id, old.kit_number, old.site_id, old.delivery_id, old.expires_on, old.subject_id)) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	return new;
end $$;
create trigger kit_is_kept before update on app.kit for each row execute function app.keep_kit();

-- Stock is managed from the beginning or not at all: a kit already given stands in no stock.
create function app.keep_kit_plan() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
begin
	if exists (select from app.subject s where s.study_id = new.study_id and s.kit_number is not null) then
		raise exception using errcode = 'HD006', message = 'KITS_BEGUN';
	end if;
	return new;
end $$;
create trigger kit_plan_is_early before insert on app.kit_plan for each row execute function app.keep_kit_plan();

-- Kits at a site that may be given out today, over all arms.
create function app.kits_to_give(p_site uuid) returns integer language sql stable set search_path = pg_catalog as $$
	select count(*)::int from app.kit k join app.kit_plan p on p.study_id = k.study_id join app.site t on t.id = k.site_id
	where k.site_id = p_site and k.status = 'in stock'
		and k.expires_on >= (app.now() at time zone t.zone)::date + p.use_days
$$;

-- The smallest arm's part of a site's full stock: that many may be gone, and every arm is still there.
create function closed.spare_kits(p_study uuid, p_full integer) returns integer language sql stable set search_path = pg_catalog as $$
	select (p_full * min((a.value ->> 'ratio')::int) / sum((a.value ->> 'ratio')::int))::int
	from closed.allocation_list l, jsonb_array_elements(l.plan -> 'arms') a where l.study_id = p_study
$$;

-- Tops the site up to its full stock, arm by arm; says how many kits that takes. Which kits, the order of their numbers says not.
create function closed.send_kits(p_delivery uuid, p_site uuid, p_expires date) returns integer
language plpgsql security definer set search_path = pg_catalog as $$
declare
	t app.site; v app.kit_level; use_days integer; today date; l closed.allocation_list; sent integer; next_number integer;
	total integer; picked text[] := '{}'; a record; held integer; more text[];
begin
	select * into t from app.site where id = p_site;
	if not found or not app.has_role(array['data_manager'], t.study_id, t.id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select * into v from app.kit_level k where k.site_id = t.id;
	select p.use_days into use_days from app.kit_plan p where p.study_id = t.study_id;
	if v.site_id is null or use_days is null then
		raise exception using errcode = 'HD016', message = 'KIT_LEVEL_NEEDED';
	end if;
	select * into l from closed.allocation_list x where x.study_id = t.study_id;
	if l.id is null then
		raise exception using errcode = 'HD016', message = 'KIT_LIST_NEEDED';
	end if;
	perform pg_advisory_xact_lock(hashtextextended('kits:' || t.study_id::text, 0));
	today := (app.now() at time zone t.zone)::date;
	select sum((x.value ->> 'ratio')::int) into total from jsonb_array_elements(l.plan -> 'arms') x;
	for a in select x.value ->> 'key' as key, (x.value ->> 'ratio')::int as ratio from jsonb_array_elements(l.plan -> 'arms') x loop
		select count(*) into held from app.kit k join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number
			where k.site_id = t.id and p.arm_key = a.key and k.status in ('in stock', 'on the way') and k.expires_on >= today + use_days;
		select coalesce(array_agg(f.kit_number), '{}') into more from (
			select p.kit_number from closed.list_position p
			where p.list_id = l.id and p.arm_key = a.key and p.subject_id is null
				and not exists (select from app.kit k where k.study_id = p.study_id and k.kit_number = p.kit_number)
			order by p.kit_number limit greatest(v.full_stock / total * a.ratio - held, 0)) f;
		if cardinality(more) < v.full_stock / total * a.ratio - held then
			raise exception using errcode = 'HD016', message = 'KITS_USED_UP';
		end if;
		picked := picked || more;
	end loop;
	sent := cardinality(picked);
	if sent = 0 then
		raise exception using errcode = 'HD016', message = 'KITS_FULL';
	end if;
	select coalesce(max(d.number), 0) + 1 into next_number from app.kit_delivery d where d.site_id = t.id;
	insert into app.kit_delivery (id, study_id, site_id, number, kits, expires_on, sent_by)
		values (p_delivery, t.study_id, t.id, next_number, sent, p_expires, app.actor());
	insert into app.kit (study_id, kit_number, site_id, delivery_id, expires_on)
		select t.study_id, n, t.id, p_delivery, p_expires from unnest(picked) n order by n;
	return sent;
end $$;

revoke all on function closed.spare_kits, closed.send_kits from public;
revoke all on function app.keep_kit, app.keep_kit_plan, app.kits_to_give from public;
grant execute on function closed.send_kits to heddle_app;
grant execute on function app.kits_to_give to heddle_app, heddle_unmasked;
grant select, insert, update on app.kit_plan, app.kit_level to heddle_app;
grant select, update on app.kit_delivery, app.kit to heddle_app;
grant select on app.kit_plan, app.kit_level, app.kit_delivery, app.kit to heddle_unmasked;
${sql.raw(
	['kit_plan']
		.map((table) => locked(table, '(select app.my_studies()) @> array[study_id]'))
		.concat(
			['kit_level', 'kit_delivery', 'kit'].map((table) =>
				locked(table, '(select app.my_sites()) @> array[site_id]')
			)
		)
		.join('\n')
)}
`.execute(db);

/** Row-level security as on every study table. */
function locked(table: string, seen: string): string {
	const who = `(select app.everywhere()) or ${seen}`;
	return `alter table app.${table} enable row level security;
alter table app.${table} force row level security;
create policy of_the_owner on app.${table} to heddle_owner using (true) with check (true);
create policy of_the_look_worker on app.${table} to heddle_unmasked using (true) with check (true);
create policy of_the_actor on app.${table} to heddle_app using (${who}) with check (${who});`;
}

/** Where nothing is masked, the arm is the subject's to know and its site's. Written by the allocation alone. */
const openLabel = (db: Kysely<unknown>) =>
	sql`
alter table app.subject add column arm_key text;
create function app.keep_arm() returns trigger language plpgsql as $$
begin
	if (case when tg_op = 'INSERT' then new.arm_key is not null else new.arm_key is distinct from old.arm_key end)
		and (current_user = 'heddle_app' or (select s.masked from app.study s where s.id = new.study_id)) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	return new;
end $$;
create trigger arm_is_kept before insert or update on app.subject for each row execute function app.keep_arm();
revoke all on function app.keep_arm from public;
`.execute(db);

const unmasking = (db: Kysely<unknown>) =>
	sql`
create table app.unmasking (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null,
	subject_id uuid not null references app.subject (id),
	kind text not null check (kind in ('emergency', 'sealed code', 'accidental')),
	person_id uuid not null references app.person (id),
	-- Who came to know the arm, where somebody else writes it down.
	known_to text not null check (length(btrim(known_to)) between 1 and 200),
	happened_at timestamptz not null,
	recorded_at timestamptz not null default app.now(),
	reason text not null check (length(btrim(reason)) between 1 and 500),
	impact text check (impact is null or length(impact) between 1 and 500),
	foreign key (study_id, site_id) references app.site (study_id, id),
	check (happened_at <= recorded_at)
);
create index unmasking_study on app.unmasking (study_id, recorded_at desc);
create index unmasking_subject on app.unmasking (subject_id);
create trigger unmasking_audit after insert on app.unmasking for each row execute function audit.record_change();
create function app.keep_unmasking() returns trigger language plpgsql as $$
begin
	if tg_op <> 'INSERT' then
		raise exception using errcode = 'HD002', message = 'The record of an unmasking cannot be altered.';
	end if;
	-- An arm is shown, or a code taken, by the closed schema's functions and by nothing else.
	if current_user = 'heddle_app' and new.kind <> 'accidental' then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	new.person_id := app.actor();
	new.recorded_at := app.now();
	return new;
end $$;
create trigger unmasking_is_kept before insert or update or delete on app.unmasking for each row execute function app.keep_unmasking();

-- Which arm was shown at an unmasking: the closed trail's part of the record.
create table closed.shown_arm (
	unmasking_id uuid primary key references app.unmasking (id),
	study_id uuid not null references app.study (id),
	subject_id uuid not null references app.subject (id),
	arm_key text not null
);
create trigger shown_arm_audit after insert or update or delete on closed.shown_arm for each row execute function audit.record_change();

-- Sheets of sealed codes, made by the look worker for one site; the file is ciphertext, its key lies here.
create table app.code_print (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null,
	asked_by uuid not null references app.person (id),
	asked_at timestamptz not null default app.now(),
	status text not null default 'waiting' check (status in ('waiting', 'made', 'failed')),
	kits integer,
	job_run_id uuid references app.job_run (id),
	version integer not null default 1,
	foreign key (study_id, site_id) references app.site (study_id, id)
);
create trigger code_print_version before update on app.code_print for each row execute function app.bump_version();
create trigger code_print_audit after insert or update or delete on app.code_print for each row execute function audit.record_change();
create table closed.code_sheet (
	print_id uuid primary key references app.code_print (id),
	study_id uuid not null references app.study (id),
	storage_key text not null,
	file_key bytea not null,
	sha256 text not null
);
create table closed.sealed_code (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	print_id uuid not null references app.code_print (id),
	kit_number text not null,
	code_hash text not null,
	used_at timestamptz,
	unmasking_id uuid references app.unmasking (id),
	unique (print_id, kit_number)
);
create index sealed_code_kit on closed.sealed_code (study_id, kit_number);
create trigger code_sheet_audit after insert or update or delete on closed.code_sheet for each row execute function audit.record_change('file_key');
create trigger sealed_code_audit after insert or update or delete on closed.sealed_code for each row execute function audit.record_change('code_hash');

-- One subject's arm, once, for the investigator of its site who asks; everybody else sees that it happened.
create function closed.unmask(p_id uuid, p_subject uuid, p_reason text) returns text
language plpgsql security definer set search_path = pg_catalog as $$
declare s app.subject; arm text; at timestamptz := app.now();
begin
	select * into s from app.subject where id = p_subject for update;
	if not found or not app.has_role(array['investigator'], s.study_id, s.site_id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select l.arm_key into arm from closed.list_position l where l.subject_id = s.id;
	if arm is null or not (select x.masked from app.study x where x.id = s.study_id) then
		raise exception using errcode = 'HD017', message = 'NOTHING_MASKED';
	end if;
	insert into app.unmasking (id, study_id, site_id, subject_id, kind, person_id, known_to, happened_at, reason)
		values (p_id, s.study_id, s.site_id, s.id, 'emergency', app.actor(), (select p.name from app.person p where p.id = app.actor()), at, p_reason);
	insert into closed.shown_arm (unmasking_id, study_id, subject_id, arm_key) values (p_id, s.study_id, s.id, arm);
	return arm;
end $$;

-- A sealed code that was opened, told afterwards. Only who opened the envelope can know it, and it is taken once.
create function closed.use_code(p_id uuid, p_subject uuid, p_hash text, p_happened timestamptz, p_known_to text, p_reason text, p_impact text)
returns void
language plpgsql security definer set search_path = pg_catalog as $$
declare s app.subject; code closed.sealed_code;
begin
	select * into s from app.subject where id = p_subject for update;
	if not found or not app.has_role(array['investigator', 'coordinator'], s.study_id, s.site_id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	select * into code from closed.sealed_code c where c.study_id = s.study_id and c.kit_number = s.kit_number and c.code_hash = p_hash for update;
	if not found then
		raise exception using errcode = 'HD017', message = 'CODE_UNKNOWN';
	end if;
	if code.used_at is not null then
		raise exception using errcode = 'HD017', message = 'CODE_USED';
	end if;
	insert into app.unmasking (id, study_id, site_id, subject_id, kind, person_id, known_to, happened_at, reason, impact)
		values (p_id, s.study_id, s.site_id, s.id, 'sealed code', app.actor(), p_known_to, p_happened, p_reason, p_impact);
	update closed.sealed_code set used_at = app.now(), unmasking_id = p_id where id = code.id;
end $$;

create function closed.open_codes(p_print uuid) returns table (storage_key text, file_key bytea, sha256 text)
language plpgsql security definer set search_path = pg_catalog as $$
declare k app.code_print;
begin
	select * into k from app.code_print where id = p_print;
	if not found or k.status <> 'made' or not app.has_role(array['independent_statistician', 'pharmacist'], k.study_id, k.site_id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	perform audit.act('code_print', k.id::text, k.study_id, k.site_id, null, '{"opened": true}');
	return query select c.storage_key, c.file_key, c.sha256 from closed.code_sheet c where c.print_id = k.id;
end $$;

revoke all on function closed.unmask, closed.use_code, closed.open_codes, app.keep_unmasking from public;
grant execute on function closed.unmask, closed.use_code, closed.open_codes to heddle_app;
grant select, insert on app.unmasking to heddle_app;
grant select on app.unmasking to heddle_unmasked;
grant select, insert on app.code_print to heddle_app;
grant select, update on app.code_print to heddle_unmasked;
grant select on closed.shown_arm, closed.code_sheet, closed.sealed_code to heddle_unmasked;
grant insert on closed.code_sheet, closed.sealed_code to heddle_unmasked;
${sql.raw(
	['unmasking', 'code_print']
		.map((table) => locked(table, '(select app.my_sites()) @> array[site_id]'))
		.join('\n')
)}

-- Further kinds of mail beside those that are there, whichever these are.
do $$
declare said text;
begin
	select pg_get_constraintdef(c.oid) into said from pg_constraint c where c.conrelid = 'app.mail'::regclass and c.conname = 'mail_kind_check';
	alter table app.mail drop constraint mail_kind_check;
	execute 'alter table app.mail add constraint mail_kind_check ' || replace(said, 'ARRAY[', 'ARRAY[''unmasking''::text, ''kits-low''::text, ');
end $$;
`.execute(db);

/**
 * As before, but a consent that was withdrawn does not count, nor does a way out that was taken back; and by either method,
 * from the site's stock where one is kept, and with the arm where nothing is masked.
 */
const allocate = (db: Kysely<unknown>) =>
	sql`
create or replace function closed.allocate(p_subject uuid) returns text language plpgsql security definer set search_path = pg_catalog as $$
declare
	s app.subject; l closed.allocation_list; place closed.list_position; numbers closed.chance; chosen text; given text; zone text;
	v app.kit_level; kept integer; at timestamptz := app.now();
begin
	select * into s from app.subject where id = p_subject for update;
	if not found or not app.has_role(array['coordinator', 'investigator'], s.study_id, s.site_id) then
		raise exception using errcode = 'HD010', message = 'NOT_PERMITTED';
	end if;
	if s.kit_number is not null then
		raise exception using errcode = 'HD011', message = 'ALREADY_RANDOMISED';
	end if;
	if not exists (select from app.consent c where c.subject_id = s.id and c.signed_at <= at and c.withdrawn_on is null) then
		raise exception using errcode = 'HD012', message = 'CONSENT_NEEDED';
	end if;
	if exists (select from app.study_exit e where e.subject_id = s.id and e.taken_back_at is null) then
		raise exception using errcode = 'HD014', message = 'LEFT_STUDY';
	end if;
	select * into l from closed.allocation_list x where x.study_id = s.study_id;
	if exists (select from closed.minimisation m where m.list_id = l.id) then
		-- Each allocation depends on all those before it.
		perform pg_advisory_xact_lock(hashtextextended('allocate:' || s.study_id::text, 0));
		select c.* into numbers from closed.chance c where c.list_id = l.id and c.subject_id is null order by c.position limit 1;
		if found then
			chosen := closed.minimised_arm(l.id, s.stratum, numbers.coin, numbers.draw);
			update closed.chance set subject_id = s.id, used_at = at, levels = s.stratum, arm_key = chosen
				where list_id = l.id and position = numbers.position;
			select p.* into place from closed.list_position p
				where p.list_id = l.id and p.arm_key = chosen and p.subject_id is null order by p.position limit 1;
		end if;
	else
		-- One at a time within a stratum, or two callers would see the same first free position.
		perform pg_advisory_xact_lock(hashtextextended('allocate:' || s.study_id::text || s.stratum::text, 0));
		select p.* into place from closed.list_position p
			where p.study_id = s.study_id and p.stratum = s.stratum and p.subject_id is null order by p.position limit 1;
	end if;
	if place.id is null then
		raise exception using errcode = 'HD013', message = 'ALLOCATION_UNAVAILABLE';
	end if;
	given := place.kit_number;
	if exists (select from app.kit_plan k where k.study_id = s.study_id) then
		perform pg_advisory_xact_lock(hashtextextended('kits:' || s.site_id::text, 0));
		select * into v from app.kit_level k where k.site_id = s.site_id;
		kept := app.kits_to_give(s.site_id);
		-- Judged over all arms: whether there is a kit must not hang on the arm that is wanted.
		if v.site_id is null or coalesce(v.full_stock - kept >= closed.spare_kits(s.study_id, v.full_stock), true) then
			raise exception using errcode = 'HD013', message = 'ALLOCATION_UNAVAILABLE';
		end if;
		-- Any of the arm's kits: a first one passed over would be known to hold something else.
		select k.kit_number into given from app.kit k
			join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number
			join app.kit_plan n on n.study_id = k.study_id join app.site t on t.id = k.site_id
			where k.site_id = s.site_id and k.status = 'in stock' and p.arm_key = place.arm_key
				and k.expires_on >= (at at time zone t.zone)::date + n.use_days
			order by sha256(convert_to(l.seed || ' kit ' || k.kit_number || ' ' || s.number, 'UTF8')) limit 1;
		if given is null then
			raise exception using errcode = 'HD013', message = 'ALLOCATION_UNAVAILABLE';
		end if;
		update app.kit set status = 'given', subject_id = s.id where study_id = s.study_id and kit_number = given;
	end if;
	update closed.list_position set subject_id = s.id, used_at = at where id = place.id;
	select t.zone into zone from app.site t where t.id = s.site_id;
	update app.subject set kit_number = given, randomised_at = at, randomised_on = (at at time zone zone)::date,
		arm_key = case when (select x.masked from app.study x where x.id = s.study_id) then null else place.arm_key end
		where id = s.id;
	return given;
end $$;
`.execute(db);
