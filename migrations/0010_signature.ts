import { sql, type Kysely } from 'kysely';

/**
 * Electronic signatures. The program says what was shown and what the signature means; who signs, under which printed
 * name, in which role and when are the database's to say. A row is never altered nor removed: a later change of the
 * record is seen by comparing what was signed with the record as it stands.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
-- Since when this session's person signs without a break: the first signature after signing in or unlocking sets it.
alter table app.session add column signing_since timestamptz;

create table app.signature (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid,
	record text not null check (record ~ '^[a-z][a-z-]{0,39}$'),
	record_id uuid not null,
	meaning text not null check (meaning in ('eligibility', 'responsibility', 'review', 'approval')),
	-- The sentence that stood beside the button.
	statement text not null check (length(btrim(statement)) between 1 and 300),
	form_version integer not null check (form_version >= 1),
	content text not null check (length(content) between 2 and 1000000),
	sha256 text not null check (sha256 ~ '^[0-9a-f]{64}$'),
	signer_id uuid not null references app.person (id),
	session_id uuid not null references app.session (id),
	printed_name text not null default '',
	role text not null default '',
	at timestamptz not null default app.now(),
	zone text not null default 'UTC',
	digest bytea not null default '',
	foreign key (study_id, site_id) references app.site (study_id, id)
);
create index signature_record on app.signature (record, record_id, id);
create index signature_study on app.signature (study_id, id);
create index signature_signer on app.signature (signer_id);

-- Ties the signer, the meaning and the instant to the record and its content: none of them can be moved to another row.
create function app.signature_digest(s app.signature) returns bytea language sql immutable as $$
	select sha256(convert_to(jsonb_build_array(s.id, s.study_id, s.site_id, s.record, s.record_id, s.meaning, s.statement,
		s.form_version, s.sha256, s.signer_id, s.session_id, s.printed_name, s.role, extract(epoch from s.at)::text, s.zone)::text, 'UTF8'))
$$;

create function app.put_signature() returns trigger language plpgsql security definer set search_path = pg_catalog as $$
declare
	who app.person;
begin
	select * into who from app.person p where p.id = app.actor() and p.active;
	-- Nobody signs for another, and no program signs for anybody.
	if not found or new.signer_id is distinct from who.id or who.kind <> 'person' then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	perform from app.session s where s.id = new.session_id and s.person_id = who.id and s.ended_at is null and s.locked_at is null;
	if not found then
		raise exception using errcode = 'HD006', message = 'NOT_SIGNED_IN';
	end if;
	if new.sha256 <> encode(sha256(convert_to(new.content, 'UTF8')), 'hex') then
		raise exception using errcode = 'HD006', message = 'INVALID';
	end if;
	new.printed_name := who.name;
	new.role := coalesce(nullif(current_setting('heddle.role', true), ''), 'none');
	new.at := app.now();
	new.zone := coalesce((select t.zone from app.site t where t.id = new.site_id), 'UTC');
	new.digest := app.signature_digest(new);
	return new;
end $$;
create trigger signature_is_own before insert on app.signature for each row execute function app.put_signature();

create function app.keep_signature() returns trigger language plpgsql as $$
begin
	raise exception using errcode = 'HD002', message = 'A signature cannot be altered or removed.';
end $$;
create trigger signature_is_kept before update or delete on app.signature for each row execute function app.keep_signature();
create trigger signatures_are_kept before truncate on app.signature execute function app.keep_signature();
create trigger signature_audit after insert on app.signature for each row execute function audit.record_change();

alter table app.signature enable row level security;
alter table app.signature force row level security;
create policy of_the_owner on app.signature to heddle_owner using (true) with check (true);
create policy of_the_look_worker on app.signature for select to heddle_unmasked using (true);
create policy of_the_actor on app.signature to heddle_app using (
	(select app.everywhere()) or ((select app.my_studies()) @> array[study_id]
		and (site_id is null or (select app.my_sites()) @> array[site_id])));

grant select, insert on app.signature to heddle_app;
grant select on app.signature to heddle_unmasked;
revoke execute on function app.signature_digest, app.put_signature, app.keep_signature from public;
grant execute on function app.signature_digest to heddle_app, heddle_unmasked;
`.execute(db);
}
