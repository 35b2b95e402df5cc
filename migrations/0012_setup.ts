import { sql, type Kysely } from 'kysely';

/**
 * A draft may gain and lose sites, rooms and consent versions. Their rows follow the draft until it is first published,
 * because people are given roles at sites before that; from then on nothing of them is taken away.
 */
export async function up(db: Kysely<unknown>): Promise<void> {
	await sql`
-- Sites and consent versions as the definition has them. New rows take the ids given; a site made in this transaction is
-- not yet among those that a study's own data manager may see, so the database writes for him.
create function app.settle_study(p_study uuid, p_sites jsonb, p_consents jsonb) returns void
language plpgsql security definer set search_path = pg_catalog as $$
declare
	state text; wanted jsonb; the_site uuid;
begin
	if not app.has_role(array['data_manager'], p_study, null) then
		raise exception using errcode = 'HD006', message = 'NOT_PERMITTED';
	end if;
	select status into state from app.study where id = p_study for update;
	if not found then
		raise exception using errcode = 'HD006', message = 'NOT_FOUND';
	end if;
	for wanted in select * from jsonb_array_elements(p_sites) loop
		select id into the_site from app.site where study_id = p_study and code = wanted ->> 'code';
		if found then
			update app.site set name = wanted ->> 'name', zone = wanted ->> 'zone', opening = wanted -> 'opening'
			where id = the_site and (name, zone, opening) is distinct from (wanted ->> 'name', wanted ->> 'zone', wanted -> 'opening');
			-- Once a study is open its sites close and open again by themselves.
			if state = 'draft' then
				update app.site set closures = wanted -> 'closures' where id = the_site and closures is distinct from wanted -> 'closures';
			end if;
		else
			the_site := (wanted ->> 'id')::uuid;
			insert into app.site (id, study_id, code, name, zone, opening, closures)
			values (the_site, p_study, wanted ->> 'code', wanted ->> 'name', wanted ->> 'zone', wanted -> 'opening', wanted -> 'closures');
		end if;
		insert into app.room (id, study_id, site_id, name)
			select (r ->> 'id')::uuid, p_study, the_site, r ->> 'name' from jsonb_array_elements(wanted -> 'rooms') r
			where not exists (select from app.room o where o.site_id = the_site and o.name = r ->> 'name');
		if state = 'draft' then
			delete from app.room o where o.site_id = the_site
				and not exists (select from jsonb_array_elements(wanted -> 'rooms') r where r ->> 'name' = o.name);
		end if;
	end loop;
	insert into app.consent_version (id, study_id, label, language, approved_on)
		select (c ->> 'id')::uuid, p_study, c ->> 'label', c ->> 'language', (c ->> 'approved_on')::date
		from jsonb_array_elements(p_consents) c
		where not exists (select from app.consent_version o
			where o.study_id = p_study and o.label = c ->> 'label' and o.language = c ->> 'language');
	if state = 'draft' then
		update app.consent_version o set approved_on = (c ->> 'approved_on')::date
			from jsonb_array_elements(p_consents) c
			where o.study_id = p_study and o.label = c ->> 'label' and o.language = c ->> 'language'
				and o.approved_on <> (c ->> 'approved_on')::date;
		delete from app.consent_version o where o.study_id = p_study
			and not exists (select from jsonb_array_elements(p_consents) c
				where o.label = c ->> 'label' and o.language = c ->> 'language');
		delete from app.room o using app.site s where s.id = o.site_id and s.study_id = p_study
			and not exists (select from jsonb_array_elements(p_sites) w where w ->> 'code' = s.code);
		delete from app.site s where s.study_id = p_study
			and not exists (select from jsonb_array_elements(p_sites) w where w ->> 'code' = s.code);
	end if;
exception when foreign_key_violation then
	raise exception using errcode = 'HD006', message = 'SITE_IN_USE';
end $$;
-- A published schedule comes in by the thousand rows: one trigger call for each statement.
drop trigger planned_visit_audit on app.planned_visit;
drop trigger measure_audit on app.measure;
drop trigger planned_measure_audit on app.planned_measure;
create trigger planned_visit_begun after insert on app.planned_visit referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger measure_begun after insert on app.measure referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger planned_measure_begun after insert on app.planned_measure referencing new table as fresh for each statement execute function audit.record_inserts();
create trigger planned_visit_audit after update or delete on app.planned_visit for each row execute function audit.record_change();
create trigger measure_audit after update or delete on app.measure for each row execute function audit.record_change();
create trigger planned_measure_audit after update or delete on app.planned_measure for each row execute function audit.record_change();
revoke execute on function app.settle_study from public;
grant execute on function app.settle_study to heddle_app;
`.execute(db);
}
