import type pg from 'pg';
import type { Scene } from '../../support/visit-scene';

export const subjectCount = 2000;

/**
 * Fills a study with 2,000 subjects (or as many as asked), half at either site, who entered over a year and a half: visits whose window has
 * passed are completed (a few are not), with every value that their visit plans.
 */
export async function bigStudy(
	client: pg.Client,
	scene: Scene,
	subjects = subjectCount
): Promise<void> {
	const days = [0, 14, 30, 91, 183, 274, 365, 548, 730];
	const around = [7, 3, 7, 14, 14, 14, 21, 28, 28];
	for (const [at, site] of scene.sites.entries())
		await client.query(
			`insert into app.subject (id, study_id, site_id, protocol_version_id, number, enrolled_on, randomised_at, randomised_on, characteristics)
			select gen_random_uuid(), $1, $2, $3, $4 || '-' || lpad(n::text, greatest(4, length(n::text)), '0') || '-7', day, day + time '09:00', day,
				jsonb_build_object('sex', case n % 2 when 0 then 'female' else 'male' end, 'birth-date', '19' || (40 + n % 50) || '-03-02')
			from (select n, current_date - 1 - (n * 540 / ($5::int / 2)) as day from generate_series(1, $5::int / 2) n) s`,
			[scene.studyId, site.id, scene.protocolVersionId, `0${at + 1}`, subjects]
		);
	await client.query(
		`insert into app.visit (id, study_id, site_id, subject_id, planned_visit_id, name, position, earliest, target, latest, status, happened_on)
		select gen_random_uuid(), s.study_id, s.site_id, s.id, p.id, p.name, p.position,
			s.randomised_on + d.day - d.around, s.randomised_on + d.day, s.randomised_on + d.day + d.around,
			case when done then 'completed' else 'planned' end, case when done then s.randomised_on + d.day end
		from app.subject s
		join app.planned_visit p on p.study_id = s.study_id
		join unnest($2::int[], $3::int[]) with ordinality as d(day, around, position) on d.position = p.position
		cross join lateral (select s.randomised_on + d.day + d.around < current_date
			and (substring(s.number from 4 for 4)::int + p.position * 7) % 20 <> 0 as done) x
		where s.study_id = $1`,
		[scene.studyId, days, around]
	);
	await client.query(
		`insert into app.measurement (id, study_id, site_id, subject_id, visit_id, measure_id, value, readings, unit, not_done_reason, taken_at, taken_by, source)
		select gen_random_uuid(), v.study_id, v.site_id, v.subject_id, v.id, m.id,
			case when skipped then null else 60 + (h % 400) / 10.0 + v.position end,
			case when m.kind = 'repeated' and not skipped then array[60 + h % 40, 61 + h % 40, 62 + h % 40]::numeric[] end,
			m.unit, case when skipped then 'Subject declined' end, v.happened_on + time '10:00', $2,
			case m.kind when 'derived' then 'derived' else 'form' end
		from app.visit v
		join app.planned_measure pm on pm.planned_visit_id = v.planned_visit_id
		join app.measure m on m.id = pm.measure_id
		cross join lateral (select abs(hashtext(v.id::text || m.key)) as h) a
		cross join lateral (select a.h % 50 = 0 as skipped) b
		where v.study_id = $1 and v.status = 'completed'`,
		[scene.studyId, scene.sites[0].nurse.id]
	);
}
