import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import type { Capability } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { addDays, dateText, plainDateOf, shortDateText, type PlainDate } from '$lib/time/dates';
import { dateInZone, timeInZone } from '$lib/time/zones';
import { closingWithinDays, timeLeft } from '../schedule/window';
import { sitesFor, type SiteHead } from '../study/sites.server';
import type { WindowRow, WindowsPage, WindowsQuery } from './windows.input';

/** How far ahead windows that are not open yet are listed. */
const aheadDays = 28;

interface Cursor {
	order: number;
	id: string;
}

function readCursor(text: string): Cursor | null {
	if (text === '') return null;
	const match = /^(\d{1,9})\.([0-9a-f-]{36})$/.exec(text);
	if (!match) throw new Refusal('INVALID', {}, { cursor: 'This is not a cursor of this list.' });
	return { order: Number(match[1]), id: match[2] as string };
}

/** Text as it stands, where a pattern would read % and _ as anything. */
export const literally = (text: string) => text.replace(/[\\%_]/g, (each) => `\\${each}`);

interface Found {
	visit_id: string;
	version: number;
	subject_id: string;
	number: string;
	visit: string;
	site_id: string;
	status: 'planned' | 'booked';
	earliest: string;
	target: string;
	latest: string;
	sorted: number;
	starts_at: Date | null;
	outside_reason: string | null;
	contact_at: Date | null;
	contact_way: string | null;
	contact_outcome: string | null;
	try_again_on: string | null;
}

/**
 * Windows by time left: those closing first at the top, then those that have passed, the latest of them first. A read of
 * one site at a time is what the index on open windows serves, so the sites are named.
 */
export const findWindows = (
	actor: Actor,
	studyId: string,
	query: WindowsQuery,
	capability: Capability = 'subject.read'
): Promise<WindowsPage> =>
	read(actor, capability, { studyId }, async (reader) => {
		const all = await sitesFor(reader, actor, studyId, capability);
		const sites = query.site === '' ? all : all.filter((site) => site.id === query.site);
		if (query.site !== '' && sites.length === 0) throw new Refusal('NOT_FOUND');
		if (sites.length === 0) return { items: [], nextCursor: null };
		return windowsOf(reader, studyId, sites, query);
	});

async function windowsOf(
	reader: Reader,
	studyId: string,
	sites: readonly SiteHead[],
	query: WindowsQuery
): Promise<WindowsPage> {
	const now = clock.now();
	const today = new Map(sites.map((site) => [site.id, dateInZone(now, site.zone)]));
	const todays = sql.join(
		sites.map((site) => sql`(${site.id}::uuid, ${today.get(site.id)}::date)`)
	);
	const lastToday = [...today.values()].sort().at(-1) as string;
	const ahead = query.what === 'ahead';
	const horizon = ahead ? addDays(plainDateOf(lastToday), aheadDays) : lastToday;
	const cursor = readCursor(query.cursor);
	// One number to sort by: days left for what is open, then days since for what has passed.
	const order = ahead
		? sql`(v.earliest - t.today)`
		: sql`case when v.latest >= t.today then v.latest - t.today else 100000 + (t.today - v.latest) end`;
	const kind = {
		due: sql`v.earliest <= t.today`,
		closing: sql`v.earliest <= t.today and v.latest between t.today and t.today + ${closingWithinDays}::int`,
		open: sql`v.earliest <= t.today and v.latest >= t.today`,
		passed: sql`v.latest < t.today`,
		ahead: sql`v.earliest > t.today and v.earliest <= t.today + ${aheadDays}::int`
	}[query.what];
	const pattern = `%${literally(query.text)}%`;
	const { rows } = await sql<Found>`
		select w.*, a.starts_at, a.outside_reason, c.at as contact_at, c.way as contact_way, c.outcome as contact_outcome, c.try_again_on
		from (
			select v.id as visit_id, v.version, v.subject_id, s.number, v.name as visit, v.site_id, v.status,
				v.earliest, v.target, v.latest, ${order} as sorted
			from app.visit v
			join (values ${todays}) as t (site_id, today) on t.site_id = v.site_id
			join app.subject s on s.id = v.subject_id
			where v.site_id in (${sql.join(sites.map((site) => sql`${site.id}::uuid`))})
				and v.status in ('planned', 'booked') and v.earliest <= ${horizon}::date
				and v.study_id = ${studyId}::uuid and ${kind}
				and not exists (select from app.study_exit e where e.subject_id = v.subject_id and e.kind <> 'intervention discontinued' and e.taken_back_at is null)
				and (${query.text} = '' or s.number ilike ${pattern} or v.name ilike ${pattern})
		) w
		left join app.appointment a on a.visit_id = w.visit_id and a.status = 'booked'
		left join lateral (
			select at, way, outcome, try_again_on from app.contact_attempt c
			where c.visit_id = w.visit_id order by c.at desc, c.id desc limit 1
		) c on true
		where ${cursor === null ? sql`true` : sql`(w.sorted, w.visit_id) > (${cursor.order}::int, ${cursor.id}::uuid)`}
		order by w.sorted, w.visit_id
		limit ${query.limit + 1}`.execute(reader);
	const shown = rows.slice(0, query.limit);
	const last = shown.at(-1);
	const byId = new Map(sites.map((site) => [site.id, site]));
	return {
		items: shown.map((row) => rowOf(row, byId.get(row.site_id) as SiteHead, now)),
		nextCursor: rows.length > query.limit && last ? `${last.sorted}.${last.visit_id}` : null
	};
}

function rowOf(row: Found, site: SiteHead, now: Date): WindowRow {
	const today = dateInZone(now, site.zone);
	const window = {
		earliest: plainDateOf(row.earliest),
		target: plainDateOf(row.target),
		latest: plainDateOf(row.latest)
	};
	const left = timeLeft(window, today);
	return {
		visitId: row.visit_id,
		version: row.version,
		subjectId: row.subject_id,
		number: row.number,
		visit: row.visit,
		siteId: site.id,
		site: site.name,
		zone: site.zone,
		status: row.status,
		...window,
		today,
		left,
		bookedOn: row.starts_at ? dateInZone(row.starts_at, site.zone) : null,
		lastStep: lastStepOf(row, site.zone)
	};
}

/** 'Fri 12 Jun' */
const dayOf = (date: PlainDate) =>
	`${dateText(date).slice(0, 3)} ${shortDateText(date).slice(0, -5)}`;

/** 'booked Fri 12 Jun, 11:00', 'telephone: no answer, 8 Jun 2026; try again 11 Jun 2026', 'not booked' */
function lastStepOf(row: Found, zone: string): string {
	if (row.starts_at) {
		const on = dateInZone(row.starts_at, zone);
		// An amendment moved the window from under the booking.
		const outside = row.outside_reason === null && (on < row.earliest || on > row.latest);
		return `booked ${dayOf(on)}, ${timeInZone(row.starts_at, zone)}${outside ? '; outside the window, to move' : ''}`;
	}
	if (row.contact_at) {
		const again = row.try_again_on
			? `; try again ${shortDateText(plainDateOf(row.try_again_on))}`
			: '';
		return `${row.contact_way}: ${row.contact_outcome}, ${shortDateText(dateInZone(row.contact_at, zone))}${again}`;
	}
	return row.latest < dateInZone(clock.now(), zone) ? 'no contact yet' : 'not booked';
}
