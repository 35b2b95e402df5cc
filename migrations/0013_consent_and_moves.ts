import { sql, type Kysely } from 'kysely';

/**
 * Amendments and who follows which version; consent in all its parts, with the signed scan; re-consent refused; subjects
 * who move to another site; a way out that was taken back.
 */
const rowsOfSubject = [
	'screening',
	'consent',
	'study_exit',
	'visit',
	'appointment',
	'contact_attempt',
	'deviation',
	'measurement'
];

export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
alter table app.protocol_version
	add column summary text check (length(btrim(summary)) between 1 and 2000),
	-- The day of the ethics committee's approval.
	add column approved_on date,
	add column reconsent boolean,
	add column reconsent_by date,
	add constraint amendment_is_whole check (number = 1 or status = 'draft'
		or (summary is not null and approved_on is not null and reconsent is not null)),
	add constraint reconsent_has_a_day check (reconsent is not true or reconsent_by is not null);

-- Since when the subject follows this version; null for the one it came in by.
alter table app.subject add column version_since date;

-- Why a visit is not required: the subject left, or an amendment has it no more. Taken back, or put back, it is to come again.
alter table app.visit
	add column ended_by uuid references app.study_exit (id),
	add column dropped_by uuid references app.protocol_version (id);

alter table app.study_exit
	add column taken_back_at timestamptz,
	add column taken_back_by uuid references app.person (id),
	add column taken_back_reason text check (length(btrim(taken_back_reason)) between 1 and 500),
	add constraint taken_back_whole check (num_nonnulls(taken_back_at, taken_back_by, taken_back_reason) in (0, 3));

alter table app.consent
	add column obtained_at timestamptz,
	add column relationship text check (length(btrim(relationship)) between 1 and 80),
	add column witnessed boolean not null default false,
	add column minor boolean not null default false,
	add column assent text check (assent in ('given', 'declined', 'not able')),
	add column assent_reason text check (length(btrim(assent_reason)) between 1 and 500),
	add column withdrawn_on date,
	add column withdrawn_reason text check (length(btrim(withdrawn_reason)) between 1 and 500),
	add constraint minor_has_a_representative check (not minor or (signed_by = 'representative' and assent is not null)),
	add constraint not_able_says_why check (assent is distinct from 'not able' or assent_reason is not null);
-- Who was taken over from elsewhere was never screened here, and may still be asked again.
alter table app.consent alter column screening_id drop not null,
	add constraint consent_is_somebodys check (num_nonnulls(screening_id, subject_id) > 0);
-- What was recorded before these parts were asked for stays as it is.
alter table app.consent add constraint representative_is_described
	check (signed_by = 'participant' or relationship is not null) not valid;

create table app.upload (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid references app.subject (id),
	consent_id uuid not null references app.consent (id),
	kind text not null check (kind in ('pdf', 'png', 'jpeg')),
	bytes integer not null check (bytes between 1 and 20971520),
	sha256 text not null check (sha256 ~ '^[0-9a-f]{64}$'),
	storage_key text not null unique,
	uploaded_by uuid not null references app.person (id),
	uploaded_at timestamptz not null default app.now(),
	superseded_at timestamptz,
	superseded_reason text check (length(btrim(superseded_reason)) between 1 and 500),
	version integer not null default 1,
	check ((superseded_at is null) = (superseded_reason is null))
);
create unique index one_current_upload on app.upload (consent_id) where superseded_at is null;
create index upload_consent on app.upload (consent_id, uploaded_at);

create table app.reconsent_refusal (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null references app.site (id),
	subject_id uuid not null references app.subject (id),
	-- The version that was refused; null where a person who came of age refused.
	protocol_version_id uuid references app.protocol_version (id),
	refused_on date not null,
	reason text check (reason is null or length(reason) <= 500),
	recorded_by uuid not null references app.person (id),
	recorded_at timestamptz not null default app.now(),
	version integer not null default 1
);
create index reconsent_refusal_subject on app.reconsent_refusal (subject_id);

create table app.transfer (
	id uuid primary key,
	study_id uuid not null references app.study (id),
	site_id uuid not null,
	from_site_id uuid not null,
	subject_id uuid not null references app.subject (id),
	transferred_on date not null,
	reason text not null check (length(btrim(reason)) between 1 and 500),
	made_by uuid not null references app.person (id),
	made_at timestamptz not null default app.now(),
	version integer not null default 1,
	foreign key (study_id, site_id) references app.site (study_id, id),
	foreign key (study_id, from_site_id) references app.site (study_id, id),
	check (site_id <> from_site_id)
);
create index transfer_subject on app.transfer (subject_id);
create index transfer_to on app.transfer (site_id, transferred_on);
create index transfer_from on app.transfer (from_site_id, transferred_on);

alter table app.mail drop constraint mail_status_check;
alter table app.mail add constraint mail_status_check
	check (status in ('waiting', 'sending', 'sent', 'failed', 'doubtful', 'no address', 'stopped'));

-- Subjects who came to one of the actor's sites from another: their whole record is read there.
create function app.moved_here() returns uuid[] language sql stable security definer set search_path = pg_catalog as $$
	select coalesce(array_agg(distinct t.subject_id), '{}') from app.transfer t join app.subject s on s.id = t.subject_id
	where app.my_sites() operator(pg_catalog.@>) array[s.site_id]
$$;
-- Subjects who left one of the actor's sites: who they are stays readable there beside what was collected there.
create function app.moved_away() returns uuid[] language sql stable security definer set search_path = pg_catalog as $$
	select coalesce(array_agg(distinct t.subject_id), '{}') from app.transfer t
	where app.my_sites() operator(pg_catalog.@>) array[t.from_site_id]
$$;
-- Screenings of subjects who came to one of the actor's sites: their signatures come along.
create function app.moved_screenings() returns uuid[] language sql stable security definer set search_path = pg_catalog as $$
	select coalesce(array_agg(c.id), '{}') from app.screening c where app.moved_here() operator(pg_catalog.@>) array[c.subject_id]
$$;

-- Moves a subject from its present site to another of the study, with its contact details and the visits to come. Nobody
-- acts at both sites, so the rows cannot be rewritten under either site's own right: this checks, and does it whole.
create function app.transfer_subject(p_id uuid, p_subject uuid, p_site uuid, p_on date, p_reason text) returns integer
language plpgsql security definer set search_path = pg_catalog as $$
declare
	s app.subject; moved integer;
begin
	select * into s from app.subject where id = p_subject for update;
	if not found or not app.has_role(array['coordinator', 'investigator'], s.study_id, s.site_id) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	if btrim(coalesce(p_reason, '')) = '' or btrim(coalesce(current_setting('heddle.reason', true), '')) = '' then
		raise exception using errcode = 'HD004', message = 'REASON_NEEDED';
	end if;
	insert into app.transfer (id, study_id, site_id, from_site_id, subject_id, transferred_on, reason, made_by)
		values (p_id, s.study_id, p_site, s.site_id, s.id, p_on, p_reason, app.actor());
	update app.subject set site_id = p_site where id = s.id;
	update app.contact_details set site_id = p_site where subject_id = s.id;
	update app.visit set site_id = p_site where subject_id = s.id and status = 'planned' and (latest is null or latest >= p_on);
	get diagnostics moved = row_count;
	return moved;
end $$;

create trigger upload_version before update on app.upload for each row execute function app.bump_version();
create trigger reconsent_refusal_version before update on app.reconsent_refusal for each row execute function app.bump_version();
create trigger transfer_version before update on app.transfer for each row execute function app.bump_version();
create trigger upload_audit after insert or update or delete on app.upload for each row execute function audit.record_change();
create trigger reconsent_refusal_audit after insert or update or delete on app.reconsent_refusal for each row execute function audit.record_change();
create trigger transfer_audit after insert or update or delete on app.transfer for each row execute function audit.record_change();

grant select, insert, update on app.upload, app.reconsent_refusal to heddle_app;
grant select on app.transfer to heddle_app;
-- The flow of a report: how many were considered, and why not entered.
grant select on app.screening to heddle_unmasked;
revoke execute on function app.moved_here, app.moved_away, app.moved_screenings, app.transfer_subject from public;
grant execute on function app.moved_here, app.moved_away, app.moved_screenings, app.transfer_subject to heddle_app;
`.execute(db);

	const mine = `(select app.everywhere()) or (select app.my_sites()) @> array[site_id]`;
	const came = (column: string) => `(select app.moved_here()) @> array[${column}]`;
	const policies: Record<string, string> = {
		upload: mine,
		reconsent_refusal: mine,
		transfer: `${mine} or (select app.my_sites()) @> array[from_site_id]`
	};
	for (const [table, seen] of Object.entries(policies))
		await sql`
alter table app.${sql.raw(table)} enable row level security;
alter table app.${sql.raw(table)} force row level security;
create policy of_the_owner on app.${sql.raw(table)} to heddle_owner using (true) with check (true);
create policy of_the_look_worker on app.${sql.raw(table)} to heddle_unmasked using (true) with check (true);
create policy of_the_actor on app.${sql.raw(table)} to heddle_app using (${sql.raw(seen)}) with check (${sql.raw(seen)});
`.execute(db);
	// Read, never written: what another site collected stays in that site's hand.
	for (const table of [...rowsOfSubject, 'upload', 'reconsent_refusal'])
		await sql`
create policy of_who_came_here on app.${sql.raw(table)} for select to heddle_app using (${sql.raw(came('subject_id'))});
`.execute(db);
	await sql`
create policy of_who_went_away on app.subject for select to heddle_app using ((select app.moved_away()) @> array[id]);
create policy of_who_came_here on app.signature for select to heddle_app using ((select app.moved_screenings()) @> array[record_id]);
create policy of_who_came_here on audit.event for select to heddle_app using ((select app.moved_here()) @> array[subject_id]);
`.execute(db);
}
