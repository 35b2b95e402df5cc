import { sql, type SqlBool } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { sitesAllowing } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { daysBetween, plainDateOf, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import { findPublished } from '../study/study.reads.server';
import { isRandomised, type StudyDefinition } from '../study/definition';
import { endsVisits, type ExitKind } from './exit';
import type { ThreadsQuery } from './subject.input';
import type { ThreadFrame, ThreadPage, ThreadRow } from './thread';

/** For drawing only: a study time in months or years, turned into days. */
const daysIn: Record<StudyDefinition['timeUnit'], number> = {
	day: 1,
	week: 7,
	month: 30.4375,
	year: 365.25
};

type Filter = Pick<ThreadsQuery, 'site' | 'search'>;

function matching(actor: Actor, studyId: string, filter: Filter) {
	const sites = sitesAllowing(actor.grants, 'subject.read', studyId);
	const like = `%${(filter.search ?? '').replace(/[\\%_]/g, (sign) => `\\${sign}`)}%`;
	return sql<SqlBool>`s.study_id = ${studyId}::uuid
		and (${sites === null} or s.site_id = any (${sites ?? []}::uuid[]))
		and (${!filter.site} or s.site_id = ${filter.site || null}::uuid)
		and (${!filter.search} or s.number ilike ${like} or s.imported_as ilike ${like})`;
}

const unitOf = async (reader: Reader, studyId: string) => {
	const published = await findPublished(reader, studyId);
	const unit = published?.definition.timeUnit ?? 'day';
	return {
		unit,
		days: daysIn[unit],
		randomised: published ? isRandomised(published.definition) : false
	};
};

/** The columns and the stretch of time of the threads that the filter leaves. */
export const getThreadFrame = (
	actor: Actor,
	studyId: string,
	filter: Filter
): Promise<ThreadFrame> =>
	read(actor, 'subject.read', { studyId }, async (reader) => {
		const { unit, days, randomised } = await unitOf(reader, studyId);
		const where = matching(actor, studyId, filter);
		const anchor = sql`coalesce(s.randomised_on, s.enrolled_on)`;
		const counted = await sql<{
			total: number;
		}>`select count(*)::int as total from app.subject s where ${where}`.execute(reader);
		const columns = await sql<{
			name: string;
			at: number;
			low: number;
			high: number;
			dated: boolean;
		}>`
			select v.name, min(v.position) as position,
				avg(coalesce((v.target - ${anchor})::numeric, v.study_time * ${days}::numeric,
					(v.happened_on - ${anchor})::numeric))::float8 as at,
				min(least((v.earliest - ${anchor})::numeric, (v.happened_on - ${anchor})::numeric,
					v.study_time * ${days}::numeric))::float8 as low,
				max(greatest((v.latest - ${anchor})::numeric, (v.happened_on - ${anchor})::numeric,
					v.study_time * ${days}::numeric))::float8 as high,
				bool_or(v.target is not null or v.happened_on is not null) as dated
			from app.visit v join app.subject s on s.id = v.subject_id
			where ${where} and v.study_id = ${studyId}::uuid
			group by v.name order by min(v.position), v.name`.execute(reader);
		const known = columns.rows.filter((column) => column.at !== null);
		const low = Math.min(0, ...known.flatMap((column) => column.low ?? []));
		const high = Math.max(1, ...known.flatMap((column) => column.high ?? []));
		const dated = known.length === 0 || known.some((column) => column.dated);
		const least = dated ? low : Math.min(...known.map((column) => column.low));
		const margin = (high - least) * 0.02 + 0.01;
		const plural = `${unit}s`;
		return {
			total: counted.rows[0]?.total ?? 0,
			from: least - margin,
			to: high + margin,
			columns: known.map(({ name, at }) => ({ name, at })),
			perUnit: dated ? 1 : days,
			axis: dated
				? `days since ${randomised ? 'randomisation' : 'enrolment'}`
				: `study time in ${plural}`
		};
	});

interface Cursor {
	value: string;
	id: string;
}

function readCursor(text: string | undefined): Cursor | null {
	if (!text) return null;
	try {
		const [value, id] = JSON.parse(Buffer.from(text, 'base64url').toString('utf8')) as unknown[];
		if (typeof value === 'string' && typeof id === 'string' && /^[0-9a-f-]{36}$/.test(id))
			return { value, id };
	} catch {
		// Said below.
	}
	throw new Refusal('INVALID', {}, { cursor: 'Begin again from the first page.' });
}

const writeCursor = (cursor: Cursor) =>
	Buffer.from(JSON.stringify([cursor.value, cursor.id])).toString('base64url');

/** A page of threads: the subjects that the filter leaves, with their visits, bookings and ways out. */
export const findThreads = (
	actor: Actor,
	studyId: string,
	query: ThreadsQuery
): Promise<ThreadPage> =>
	read(actor, 'subject.read', { studyId }, async (reader) => {
		const after = readCursor(query.cursor);
		const column = sql.raw(query.sort === 'enrolled' ? 's.enrolled_on::text' : 's.number');
		const direction = sql.raw(query.order === 'down' ? 'desc' : 'asc');
		const beyond = sql.raw(query.order === 'down' ? '<' : '>');
		const { rows } = await sql<SubjectRow & { sorted: string }>`
			select s.id, s.number, s.imported_as, s.enrolled_on, s.randomised_on, ${column} as sorted,
				p.id as site_id, p.code, p.name as site_name, p.zone
			from app.subject s join app.site p on p.id = s.site_id
			where ${matching(actor, studyId, query)}
				and (${after === null} or (${column}, s.id) ${beyond} (${after?.value ?? ''}, ${after?.id ?? null}::uuid))
			order by ${column} ${direction}, s.id ${direction}
			limit ${query.limit + 1}`.execute(reader);
		const { days } = await unitOf(reader, studyId);
		const page = rows.slice(0, query.limit);
		const items = await threadsOf(reader, studyId, page, days);
		const last = page.at(-1);
		return {
			items,
			nextCursor:
				rows.length > query.limit && last ? writeCursor({ value: last.sorted, id: last.id }) : null
		};
	});

interface SubjectRow {
	id: string;
	number: string;
	imported_as: string | null;
	enrolled_on: string;
	randomised_on: string | null;
	site_id: string;
	code: string;
	site_name: string;
	zone: string;
}

/** One subject's thread, for the page that shows the whole record. */
export async function threadOf(
	reader: Reader,
	studyId: string,
	subjectId: string
): Promise<ThreadRow> {
	const { rows } = await sql<SubjectRow>`
		select s.id, s.number, s.imported_as, s.enrolled_on, s.randomised_on,
			p.id as site_id, p.code, p.name as site_name, p.zone
		from app.subject s join app.site p on p.id = s.site_id
		where s.study_id = ${studyId}::uuid and s.id = ${subjectId}::uuid`.execute(reader);
	const { days } = await unitOf(reader, studyId);
	const [row] = await threadsOf(reader, studyId, rows, days);
	if (!row) throw new Refusal('NOT_FOUND');
	return row;
}

async function threadsOf(
	reader: Reader,
	studyId: string,
	subjects: SubjectRow[],
	unitDays: number
): Promise<ThreadRow[]> {
	if (subjects.length === 0) return [];
	const ids = subjects.map((subject) => subject.id);
	const visits = await reader
		.selectFrom('visit as v')
		.leftJoin('appointment as a', (join) =>
			join.onRef('a.visit_id', '=', 'v.id').on('a.status', '=', 'booked')
		)
		.select([
			'v.id',
			'v.subject_id',
			'v.name',
			'v.position',
			'v.status',
			'v.earliest',
			'v.target',
			'v.latest',
			'v.happened_on',
			'v.study_time',
			'a.starts_at',
			'a.zone'
		])
		.where('v.study_id', '=', studyId)
		.where('v.subject_id', 'in', ids)
		.orderBy('v.position')
		.orderBy('v.id')
		.execute();
	const exits = await reader
		.selectFrom('study_exit')
		.select(['subject_id', 'kind', 'happened_on'])
		.where('study_id', '=', studyId)
		.where('subject_id', 'in', ids)
		.where('taken_back_at', 'is', null)
		.orderBy('happened_on')
		.orderBy('id')
		.execute();
	const visitsOf = new Map<string, typeof visits>();
	for (const visit of visits) {
		const own = visitsOf.get(visit.subject_id);
		if (own) own.push(visit);
		else visitsOf.set(visit.subject_id, [visit]);
	}
	const now = clock.now();
	return subjects.map((subject) => {
		const anchor = plainDateOf(subject.randomised_on ?? subject.enrolled_on);
		const since = (date: string | null) =>
			date === null ? null : daysBetween(anchor, plainDateOf(date));
		const own = visitsOf.get(subject.id) ?? [];
		const undated =
			own.length > 0 &&
			own.every((v) => v.study_time !== null && v.happened_on === null && v.target === null);
		const exit = exits.find((each) => each.subject_id === subject.id && endsVisits(each.kind));
		const today: PlainDate = dateInZone(now, subject.zone);
		return {
			id: subject.id,
			number: subject.number,
			importedAs: subject.imported_as,
			site: { id: subject.site_id, code: subject.code, name: subject.site_name },
			enrolledOn: subject.enrolled_on,
			randomisedOn: subject.randomised_on,
			today: undated ? null : daysBetween(anchor, today),
			exit: exit
				? {
						kind: exit.kind as ExitKind,
						at: undated ? null : since(exit.happened_on),
						on: exit.happened_on
					}
				: null,
			visits: own.map((visit) => ({
				id: visit.id,
				name: visit.name,
				position: visit.position,
				status: visit.status,
				earliest: since(visit.earliest),
				target: since(visit.target),
				latest: since(visit.latest),
				took:
					since(visit.happened_on) ??
					(visit.study_time === null ? null : visit.study_time * unitDays),
				booked: visit.starts_at
					? since(dateInZone(visit.starts_at, visit.zone ?? subject.zone))
					: null,
				earliestOn: visit.earliest,
				latestOn: visit.latest
			}))
		};
	});
}
