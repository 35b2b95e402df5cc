import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { pageOf, type Page } from '$lib/server/api/page';
import { read, type Reader } from '$lib/server/change';
import { may, sitesAllowing } from '$lib/server/permission';
import { addDays, plainDateOf } from '$lib/time/dates';
import { instantText, isoWithOffset } from '$lib/time/zones';
import type { AuditEvent, AuditFilter } from './audit.input';
import { auditRoleName, changesOf, recordName, sentence, type historyRecords } from './words';

const events = (reader: Reader, studyId: string, sites: readonly string[] | null) =>
	reader
		.selectFrom('audit.event as e')
		.innerJoin('person as p', 'p.id', 'e.actor')
		.leftJoin('subject as s', 's.id', 'e.subject_id')
		.leftJoin('site as t', 't.id', 'e.site_id')
		.select([
			'e.id',
			'e.at',
			'e.wall_at',
			'e.role',
			'e.action',
			'e.record',
			'e.record_id',
			'e.site_id',
			'e.personal',
			'e.before',
			'e.after',
			'e.reason',
			'e.request_id',
			'p.name as who',
			's.number as subject',
			't.code as site_code',
			't.name as site_name',
			't.zone'
		])
		.where('e.study_id', '=', studyId)
		.$if(sites !== null, (q) =>
			q.where((eb) =>
				eb.or([
					eb('e.site_id', 'is', null),
					...(sites && sites.length > 0 ? [eb('e.site_id', 'in', sites)] : [])
				])
			)
		);

type Found = Awaited<ReturnType<ReturnType<typeof events>['executeTakeFirstOrThrow']>>;
type Row = Record<string, unknown> | null;

const like = (text: string) => `%${text.replace(/[\\%_]/g, '\\$&')}%`;

function filtered(query: ReturnType<typeof events>, filter: AuditFilter) {
	const { from, to, who, role, record, subject, action } = filter;
	return query
		.$if(Boolean(from), (q) => q.where('e.at', '>=', new Date(`${from}T00:00:00Z`)))
		.$if(Boolean(to), (q) =>
			q.where('e.at', '<', new Date(`${addDays(plainDateOf(to as string), 1)}T00:00:00Z`))
		)
		.$if(Boolean(who), (q) => q.where('p.name', 'ilike', like(who as string)))
		.$if(Boolean(role), (q) => q.where('e.role', '=', role as string))
		.$if(Boolean(record), (q) => q.where('e.record', '=', record as string))
		.$if(Boolean(subject), (q) => q.where('s.number', 'ilike', like(subject as string)))
		.$if(Boolean(action), (q) => q.where('e.action', '=', action as Found['action']));
}

/** Names for the ids that stand in the events, and a label for the things they are about. */
async function namesFor(reader: Reader, rows: readonly Found[]) {
	const ids = new Set<string>();
	const pattern = /[0-9a-f]{8}(?:-[0-9a-f]{4}){3}-[0-9a-f]{12}/g;
	for (const row of rows)
		for (const id of JSON.stringify([row.before, row.after, row.record_id]).match(pattern) ?? [])
			ids.add(id);
	const labels = new Map<string, string>();
	const names = new Map<string, string>();
	if (ids.size > 0) {
		const list = [...ids];
		const { rows: found } = await sql<{ id: string; name: string; label: string | null }>`
			with wanted as (select unnest(${list}::uuid[]) as id)
			select p.id, p.name, null as label from app.person p join wanted using (id)
			union all select t.id, t.name, t.name from app.site t join wanted using (id)
			union all select r.id, r.name, r.name from app.room r join wanted using (id)
			union all select m.id, m.name, m.name from app.measure m join wanted using (id)
			union all select v.id, v.name, v.name from app.planned_visit v join wanted using (id)
			union all select v.id, v.name, v.name from app.visit v join wanted using (id)
			union all select s.id, s.number, s.number from app.subject s join wanted using (id)
			union all select c.id, c.label, c.label from app.consent_version c join wanted using (id)
			union all select a.id, v.name, v.name from app.appointment a join wanted using (id) join app.visit v on v.id = a.visit_id
			union all select x.id, m.name || ', ' || v.name, m.name || ', ' || v.name from app.measurement x join wanted using (id)
				join app.measure m on m.id = x.measure_id join app.visit v on v.id = x.visit_id`.execute(reader);
		for (const { id, name, label } of found) {
			names.set(id, name);
			if (label) labels.set(id, label);
		}
	}
	return { names, labels };
}

async function told(
	reader: Reader,
	actor: Actor,
	studyId: string,
	rows: readonly Found[]
): Promise<AuditEvent[]> {
	const { names, labels } = await namesFor(reader, rows);
	return rows.map((row) => {
		const zone = row.zone ?? 'UTC';
		const before = row.before as Row;
		const after = row.after as Row;
		const mayPersonal =
			row.site_id !== null && may(actor.grants, 'contact.read', { studyId, siteId: row.site_id });
		const { changes, hidden } = changesOf(
			{ ...row, before, after },
			{ of: (id) => names.get(id), instant: (iso) => instantText(new Date(iso), zone) },
			mayPersonal
		);
		return {
			id: row.id,
			at: isoWithOffset(row.at, zone),
			when: instantText(row.at, zone),
			who: row.who,
			role: auditRoleName(row.role),
			action: row.action,
			record: recordName(row.record),
			recordId: row.record_id,
			said: sentence(
				{ ...row, before, after },
				row.record_id ? labels.get(row.record_id) : undefined
			),
			site: row.site_code ? `${row.site_code} ${row.site_name}` : null,
			subject: row.subject,
			changes,
			hidden,
			reason: row.reason,
			requestId: row.request_id
		};
	});
}

/** The study's trail, newest first; a monitor reads the sites under his care. */
export const listEvents = (
	actor: Actor,
	studyId: string,
	filter: AuditFilter,
	page: { cursor?: string | undefined; limit: number }
): Promise<Page<AuditEvent>> =>
	read(actor, 'audit.read', { studyId }, async (reader) => {
		const rows = await filtered(
			events(reader, studyId, sitesAllowing(actor.grants, 'audit.read', studyId)),
			filter
		)
			.$if(page.cursor !== undefined, (q) => q.where('e.id', '<', page.cursor as string))
			.orderBy('e.id', 'desc')
			.limit(page.limit + 1)
			.execute();
		const found = pageOf(rows, page.limit, (row) => row.id);
		return { ...found, items: await told(reader, actor, studyId, found.items) };
	});

/** A stretch of the trail in the order in which it was written, for the export. */
export const eventsAfter = (
	actor: Actor,
	studyId: string,
	filter: AuditFilter,
	stretch: { after: string; upTo: string; limit: number }
): Promise<AuditEvent[]> =>
	read(actor, 'audit.export', { studyId }, async (reader) => {
		const rows = await filtered(
			events(reader, studyId, sitesAllowing(actor.grants, 'audit.export', studyId)),
			filter
		)
			.where('e.id', '>', stretch.after)
			.where('e.id', '<=', stretch.upTo)
			.orderBy('e.id')
			.limit(stretch.limit)
			.execute();
		return told(reader, actor, studyId, rows);
	});

/** Everything that ever happened to one record, oldest first, for who sees the subject it belongs to. */
export const getHistory = (
	actor: Actor,
	studyId: string,
	record: (typeof historyRecords)[number],
	id: string
): Promise<AuditEvent[]> =>
	read(actor, 'subject.read', { studyId }, async (reader) => {
		const rows = await events(reader, studyId, sitesAllowing(actor.grants, 'subject.read', studyId))
			.where('e.record', '=', record)
			.where('e.record_id', '=', id)
			.orderBy('e.id')
			.limit(1000)
			.execute();
		if (rows.length === 0) throw new Refusal('NOT_FOUND');
		return told(reader, actor, studyId, rows);
	});
