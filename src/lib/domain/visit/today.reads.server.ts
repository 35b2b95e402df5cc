import { sql } from 'kysely';
import type { Role } from '../person/roles';
import { closingWithinDays } from '../schedule/window';
import { armName } from '../study/definition';
import { sitesFor, type SiteHead } from '../study/sites.server';
import { getPublished } from '../study/study.reads.server';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { addDays, dateText, mondayOf, shortDateText } from '$lib/time/dates';
import { dateInZone, dayInZone, timeInZone } from '$lib/time/zones';

/** The roles by which the actor has a part in the study. */
export const rolesIn = (actor: Actor, studyId: string): Set<Role> =>
	new Set(
		actor.grants
			.filter((grant) => grant.studyId === null || grant.studyId === studyId)
			.map((grant) => grant.role)
	);

export interface TodaysVisit {
	visitId: string;
	number: string;
	/** Where the study masks nothing. */
	arm: string | null;
	visit: string;
	site: string;
	/** By the site's clocks; null for a visit under way without an appointment today. */
	time: string | null;
	room: string | null;
	staff: string | null;
	mine: boolean;
	minutes: number;
	status: 'planned' | 'booked' | 'under way' | 'completed' | 'missed' | 'not required';
}

/** Visits booked for today at these sites, each by its own today, and whatever is under way. */
async function todaysVisits(
	reader: Reader,
	actor: Actor,
	studyId: string,
	sites: readonly SiteHead[]
): Promise<TodaysVisit[]> {
	const now = clock.now();
	const found: TodaysVisit[] = [];
	for (const site of sites) {
		const day = dayInZone(dateInZone(now, site.zone), site.zone);
		const rows = await reader
			.selectFrom('appointment as a')
			.innerJoin('visit as v', 'v.id', 'a.visit_id')
			.innerJoin('subject as s', 's.id', 'v.subject_id')
			.innerJoin('room as r', 'r.id', 'a.room_id')
			.innerJoin('person as p', 'p.id', 'a.staff_id')
			.select([
				'v.id',
				'v.status',
				'v.name as visit',
				's.number',
				's.arm_key',
				'a.starts_at',
				'a.ends_at',
				'a.staff_id',
				'r.name as room',
				'p.name as staff'
			])
			.where('a.site_id', '=', site.id)
			.where('a.study_id', '=', studyId)
			.where('a.status', '!=', 'cancelled')
			.where('a.starts_at', '>=', day.start)
			.where('a.starts_at', '<', day.end)
			.orderBy('a.starts_at')
			.orderBy('a.id')
			.limit(200)
			.execute();
		const begun = await reader
			.selectFrom('visit as v')
			.innerJoin('subject as s', 's.id', 'v.subject_id')
			.select(['v.id', 'v.name as visit', 's.number', 's.arm_key'])
			.where('v.site_id', '=', site.id)
			.where('v.study_id', '=', studyId)
			.where('v.status', '=', 'under way')
			.orderBy('v.happened_on')
			.limit(50)
			.execute();
		found.push(
			...rows.map((row) => ({
				visitId: row.id,
				number: row.number,
				arm: row.arm_key,
				visit: row.visit,
				site: site.name,
				time: timeInZone(row.starts_at, site.zone),
				room: row.room,
				staff: row.staff,
				mine: row.staff_id === actor.personId,
				minutes: Math.round((row.ends_at.getTime() - row.starts_at.getTime()) / 60_000),
				status: row.status
			})),
			...begun
				.filter((row) => !rows.some((each) => each.id === row.id))
				.map((row) => ({
					visitId: row.id,
					number: row.number,
					arm: row.arm_key,
					visit: row.visit,
					site: site.name,
					time: null,
					room: null,
					staff: null,
					mine: false,
					minutes: 0,
					status: 'under way' as const
				}))
		);
	}
	// In a masked study no subject has one, and the definition is not asked for.
	if (found.every((each) => each.arm === null)) return found;
	const { definition } = await getPublished(reader, studyId);
	return found.map((each) => ({ ...each, arm: armName(definition, each.arm) }));
}

export interface WeekAhead {
	/** '8 Jun' of the week's Monday. */
	from: string;
	label: string;
	expected: number;
	booked: number;
}

/** Visits expected in this week and the three that follow: where they are booked, else by their target. */
async function weeksAhead(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[]
): Promise<WeekAhead[]> {
	const [first] = sites;
	if (!first) return [];
	const today = dateInZone(clock.now(), first.zone);
	const monday = mondayOf(today);
	const { rows } = await sql<{ week: number; expected: number; booked: number }>`
		select week, count(*)::int as expected, count(starts_at)::int as booked from (
			select a.starts_at, (case when a.starts_at is not null then (a.starts_at at time zone a.zone)::date
				else greatest(v.target, ${today}::date) end - ${monday}::date) / 7 as week
			from app.visit v
			left join app.appointment a on a.visit_id = v.id and a.status = 'booked'
			where v.site_id in (${sql.join(sites.map((site) => sql`${site.id}::uuid`))})
				and v.study_id = ${studyId}::uuid and v.status in ('planned', 'booked')
				and v.latest >= ${today}::date and v.earliest <= ${addDays(monday, 35)}::date
				and (a.starts_at is null or a.starts_at >= ${dayInZone(today, first.zone).start})
		) w where week between 0 and 3 group by week`.execute(reader);
	return [0, 1, 2, 3].map((week) => {
		const row = rows.find((each) => each.week === week);
		const from = addDays(monday, week * 7);
		return {
			from: shortDateText(from).replace(/ \d{4}$/, ''),
			label: week === 0 ? 'this week' : `week of ${shortDateText(from).replace(/ \d{4}$/, '')}`,
			expected: row?.expected ?? 0,
			booked: row?.booked ?? 0
		};
	});
}

export interface WorkAtSites {
	sites: SiteHead[];
	day: string;
	visits: TodaysVisit[];
	closing: number;
	passed: number;
	weeks: WeekAhead[];
}

/** What is to be done at the actor's sites today: for coordinators, nurses and investigators. */
export const getWorkAtSites = (actor: Actor, studyId: string): Promise<WorkAtSites> =>
	read(actor, 'feed.own', { studyId }, async (reader) => {
		const sites = await sitesFor(reader, actor, studyId, 'feed.own');
		const [first] = sites;
		const counts = await Promise.all(sites.map((site) => openCounts(reader, studyId, site)));
		return {
			sites,
			day: dateText(dateInZone(clock.now(), first?.zone ?? 'UTC')),
			visits: await todaysVisits(reader, actor, studyId, sites),
			closing: counts.reduce((sum, site) => sum + site.closing, 0),
			passed: counts.reduce((sum, site) => sum + site.passed, 0),
			weeks: await weeksAhead(reader, studyId, sites)
		};
	});

/** Windows at a site that close within three days, and that have passed; the index on open windows serves it. */
async function openCounts(reader: Reader, studyId: string, site: SiteHead) {
	const today = dateInZone(clock.now(), site.zone);
	const { rows } = await sql<{ closing: number; passed: number }>`
		select count(*) filter (where v.latest < ${today}::date)::int as passed,
			count(*) filter (where v.latest between ${today}::date and ${addDays(today, closingWithinDays)}::date)::int as closing
		from app.visit v
		where v.site_id = ${site.id}::uuid and v.study_id = ${studyId}::uuid
			and v.status in ('planned', 'booked') and v.earliest <= ${today}::date`.execute(reader);
	return rows[0] ?? { closing: 0, passed: 0 };
}

export interface SiteCount {
	siteId: string;
	site: string;
	subjects: number;
	completed: number;
	underWay: number;
	missed: number;
	passed: number;
	closing: number;
	/** Of the visits whose window has closed or that took place, how many did; null while there is none. */
	tookPlace: number | null;
	notDone: number;
}

async function siteCounts(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[]
): Promise<SiteCount[]> {
	const now = clock.now();
	return Promise.all(
		sites.map(async (site) => {
			const today = dateInZone(now, site.zone);
			const soon = addDays(today, closingWithinDays);
			const { rows } = await sql<
				Record<
					'subjects' | 'completed' | 'under_way' | 'missed' | 'passed' | 'closing' | 'not_done',
					number
				>
			>`
				select (select count(*)::int from app.subject s where s.site_id = ${site.id}::uuid and s.study_id = ${studyId}::uuid) as subjects,
					(select count(*)::int from app.measurement n where n.site_id = ${site.id}::uuid and n.study_id = ${studyId}::uuid
						and n.not_done_reason is not null and n.source <> 'derived') as not_done,
					count(*) filter (where v.status = 'completed')::int as completed,
					count(*) filter (where v.status = 'under way')::int as under_way,
					count(*) filter (where v.status = 'missed')::int as missed,
					count(*) filter (where v.status in ('planned', 'booked') and v.latest < ${today}::date)::int as passed,
					count(*) filter (where v.status in ('planned', 'booked') and v.earliest <= ${today}::date
						and v.latest between ${today}::date and ${soon}::date)::int as closing
				from app.visit v where v.site_id = ${site.id}::uuid and v.study_id = ${studyId}::uuid`.execute(
				reader
			);
			const row = rows[0];
			const [completed, missed, passed] = [row?.completed ?? 0, row?.missed ?? 0, row?.passed ?? 0];
			const over = completed + missed + passed;
			return {
				siteId: site.id,
				site: site.name,
				subjects: row?.subjects ?? 0,
				completed,
				underWay: row?.under_way ?? 0,
				missed,
				passed,
				closing: row?.closing ?? 0,
				tookPlace: over === 0 ? null : completed / over,
				notDone: row?.not_done ?? 0
			};
		})
	);
}

/** How the sites stand, pooled over everybody there: for who oversees them. */
export const getSiteCounts = (actor: Actor, studyId: string): Promise<SiteCount[]> =>
	read(actor, 'subject.read', { studyId }, async (reader) =>
		siteCounts(reader, studyId, await sitesFor(reader, actor, studyId, 'subject.read'))
	);

/** How many screenings wait for the answers or the decision of somebody here. */
export const countScreenings = (actor: Actor, studyId: string): Promise<number> =>
	read(actor, 'screening.edit', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('screening')
			.select((of) => of.fn.countAll<string>().as('n'))
			.where('study_id', '=', studyId)
			.where('outcome', '=', 'in progress')
			.executeTakeFirstOrThrow();
		return Number(row.n);
	});

export interface StudyState {
	status: 'draft' | 'open' | 'ended';
	published: boolean;
	people: number;
	/** Sites whose approval is not recorded yet. */
	unapproved: number;
	subjects: number;
	cuts: number;
}

/** How far the study has come: what a data manager does next follows from it. */
export const getStudyState = (actor: Actor, studyId: string): Promise<StudyState> =>
	read(actor, 'study.edit', { studyId }, async (reader) => {
		const { rows } = await sql<StudyState>`
			select s.status,
				exists (select from app.protocol_version v where v.study_id = s.id and v.status = 'published') as published,
				(select count(distinct r.person_id)::int from app.person_role r where r.study_id = s.id
					and r.role in ('coordinator', 'nurse', 'investigator')) as people,
				(select count(*)::int from app.site t where t.study_id = s.id and t.approved_on is null) as unapproved,
				(select count(*)::int from app.subject u where u.study_id = s.id) as subjects,
				(select count(*)::int from app.cut c where c.study_id = s.id) as cuts
			from app.study s where s.id = ${studyId}::uuid`.execute(reader);
		return rows[0] as StudyState;
	});
