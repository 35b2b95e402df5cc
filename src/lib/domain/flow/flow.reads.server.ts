import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { dateInZone } from '$lib/time/zones';
import { sitesFor, type SiteHead } from '../study/sites.server';
import { isRandomised } from '../study/definition';
import { getPublished } from '../study/study.reads.server';
import { enrolmentAgainstPlan, type SitePlan } from './enrolment-plan';
import { flowOf, type Flow, type FlowScreening, type FlowSubject } from './flow';

interface Row {
	arm_key: string | null;
	screened: boolean;
	randomised: boolean;
	exits: string[];
	measured: boolean;
}

async function subjectsAt(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[],
	primary: string
): Promise<Row[]> {
	const { rows } = await sql<Row>`
		select s.arm_key, s.randomised_at is not null as randomised,
			exists (select from app.screening c where c.subject_id = s.id) as screened,
			coalesce((select jsonb_agg(x.kind) from app.study_exit x where x.subject_id = s.id and x.taken_back_at is null), '[]') as exits,
			exists (select from app.measurement n join app.measure m on m.id = n.measure_id
				where n.subject_id = s.id and m.key = ${primary} and (n.value is not null or n.text_value is not null)) as measured
		from app.subject s where s.study_id = ${studyId}::uuid
			and s.site_id in (${sql.join(sites.map((site) => sql`${site.id}::uuid`))})`.execute(reader);
	return rows;
}

async function screeningsAt(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[]
): Promise<FlowScreening[]> {
	// Somebody who moved is counted where he is now, and so is his screening.
	const { rows } = await sql<FlowScreening>`
		select c.outcome, c.reason from app.screening c left join app.subject s on s.id = c.subject_id
		where c.study_id = ${studyId}::uuid
			and coalesce(s.site_id, c.site_id) in (${sql.join(sites.map((site) => sql`${site.id}::uuid`))})`.execute(
		reader
	);
	return rows;
}

export interface FlowView {
	flow: Flow;
	masked: boolean;
	sites: string[];
	plan: SitePlan[];
}

/** The flow of participants and enrolment against plan, at the sites the actor may see. */
export async function getFlow(actor: Actor, studyId: string): Promise<FlowView> {
	const held = await read(actor, 'flow.read', { studyId }, async (reader) => {
		const sites = await sitesFor(reader, actor, studyId, 'flow.read');
		const { definition } = await getPublished(reader, studyId);
		if (sites.length === 0) return { sites, definition, subjects: [], screenings: [], months: [] };
		const { rows: months } = await sql<{ site: string; month: string; n: number }>`
			select t.code as site, to_char(s.enrolled_on, 'YYYY-MM') as month, count(*)::int as n
			from app.subject s join app.site t on t.id = s.site_id
			where s.study_id = ${studyId}::uuid and s.site_id in (${sql.join(sites.map((site) => sql`${site.id}::uuid`))})
			group by 1, 2`.execute(reader);
		return {
			sites,
			definition,
			subjects: await subjectsAt(reader, studyId, sites, definition.primaryMeasure),
			screenings: await screeningsAt(reader, studyId, sites),
			months
		};
	});
	const { definition, sites } = held;
	const randomises = isRandomised(definition);
	const byArm = randomises && !definition.masked;
	const names = new Map(definition.arms.map((arm) => [arm.key, arm.name]));
	const subjects = held.subjects.map(({ arm_key, ...subject }): FlowSubject => ({
		...subject,
		// Filled in where nothing is masked, and nowhere else.
		arm: byArm && arm_key !== null ? (names.get(arm_key) ?? null) : null
	}));
	const thisMonth = dateInZone(clock.now(), sites[0]?.zone ?? 'UTC').slice(0, 7);
	return {
		flow: flowOf(held.screenings, subjects, {
			randomises,
			arms: byArm ? definition.arms.map((arm) => arm.name) : null
		}),
		masked: definition.masked,
		sites: sites.map((site) => site.name),
		plan: enrolmentAgainstPlan(definition.enrolmentPlan, sites, held.months, thisMonth)
	};
}
