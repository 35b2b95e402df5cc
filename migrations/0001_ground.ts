import { sql, type Kysely } from 'kysely';

/**
 * Schemas, the clock, and who is asking. Every transaction first calls app.enter(); row-level security and the
 * audit triggers read what it set. Nothing here trusts the program to have filtered by study or site.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
create extension if not exists btree_gist;
create extension if not exists pgcrypto;
create schema if not exists app;
create schema if not exists closed;
create schema if not exists audit;
create schema if not exists queue;
revoke all on schema public from public;
grant usage on schema app, audit to heddle_app, heddle_unmasked;
grant usage on schema closed to heddle_app, heddle_unmasked;
grant usage on schema queue to heddle_app, heddle_unmasked;

create table app.installation (
	only_one boolean primary key default true check (only_one),
	clock_may_move boolean not null default false,
	training boolean not null default false,
	set_up_at timestamptz
);
insert into app.installation default values;
grant select on app.installation to heddle_app, heddle_unmasked;

-- The server's clock. A demonstration database, and only one marked so by its owner, may be told another time.
create function app.now() returns timestamptz language plpgsql volatile security definer set search_path = pg_catalog as $$
declare told text := nullif(current_setting('heddle.clock', true), '');
begin
	if told is not null and (select clock_may_move from app.installation) then
		return told::timestamptz;
	end if;
	return clock_timestamp();
end $$;

create function app.actor() returns uuid language sql stable as
	$$ select nullif(current_setting('heddle.actor', true), '')::uuid $$;
create function app.everywhere() returns boolean language sql stable as
	$$ select coalesce(current_setting('heddle.everywhere', true), '') = 'on' $$;
create function app.my_studies() returns uuid[] language sql stable as
	$$ select coalesce(nullif(current_setting('heddle.studies', true), ''), '{}')::uuid[] $$;
create function app.my_sites() returns uuid[] language sql stable as
	$$ select coalesce(nullif(current_setting('heddle.sites', true), ''), '{}')::uuid[] $$;

create function app.bump_version() returns trigger language plpgsql as $$
begin
	new.version := old.version + 1;
	return new;
end $$;
`.execute(db);
}
