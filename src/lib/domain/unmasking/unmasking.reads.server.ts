import { sql } from 'kysely';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { clock } from '$lib/time/clock';
import { instantText, timeInZone } from '$lib/time/zones';
import { getSite, siteOf } from '../subject/site.reads.server';
import { peopleWith, toldRoles } from './notice.server';
import { roleNames, type Role } from '../person/roles';

export interface UnmaskingLine {
	id: string;
	subjectId: string;
	subject: string;
	site: string;
	kind: string;
	/** In the site's zone. */
	happened: string;
	recorded: string;
	knownTo: string;
	by: string;
	reason: string;
	impact: string | null;
}

export const kindWords: Record<string, string> = {
	emergency: 'Emergency, shown by Heddle',
	'sealed code': 'Emergency, sealed code opened',
	accidental: 'By accident'
};

const lines = (reader: Reader, studyId: string) =>
	reader
		.selectFrom('unmasking as u')
		.innerJoin('subject as s', 's.id', 'u.subject_id')
		.innerJoin('site as t', 't.id', 'u.site_id')
		.innerJoin('person as p', 'p.id', 'u.person_id')
		.select([
			'u.id',
			'u.subject_id',
			's.number',
			't.name as site',
			't.zone',
			'u.kind',
			'u.happened_at',
			'u.recorded_at',
			'u.known_to',
			'p.name as by',
			'u.reason',
			'u.impact'
		])
		.where('u.study_id', '=', studyId)
		.orderBy('u.recorded_at', 'desc')
		.orderBy('u.id', 'desc');

type Row = Awaited<ReturnType<ReturnType<typeof lines>['execute']>>[number];
const lineOf = (row: Row): UnmaskingLine => ({
	id: row.id,
	subjectId: row.subject_id,
	subject: row.number,
	site: row.site,
	kind: kindWords[row.kind] ?? row.kind,
	happened: instantText(row.happened_at, row.zone),
	recorded: instantText(row.recorded_at, row.zone),
	knownTo: row.known_to,
	by: row.by,
	reason: row.reason,
	impact: row.impact
});

const mostLines = 500;

/** Every unmasking of the study that the actor's sites had, the newest first, and who holds an unmasked role. */
export const findUnmaskings = (
	actor: Actor,
	studyId: string
): Promise<{ items: UnmaskingLine[]; unmasked: { name: string; role: string }[] }> =>
	read(actor, 'unmasking.read', { studyId }, async (reader) => {
		const rows = await lines(reader, studyId).limit(mostLines).execute();
		const { rows: unmasked } = await sql<{ name: string; role: Role }>`
			select distinct p.name, r.role from app.person_role r join app.person p on p.id = r.person_id
			where p.active and r.study_id = ${studyId}::uuid and r.role in ('independent_statistician', 'board_member', 'pharmacist')
				and app.in_force(r, (app.now() at time zone 'UTC')::date) order by r.role, p.name`.execute(reader);
		return {
			items: rows.map(lineOf),
			unmasked: unmasked.map(({ name, role }) => ({ name, role: roleNames[role] ?? role }))
		};
	});

const noticeDays = 14;

/** Those of the last two weeks, for the first page of the people who are told. */
export const findRecentUnmaskings = (actor: Actor, studyId: string): Promise<UnmaskingLine[]> =>
	read(actor, 'unmasking.read', { studyId }, async (reader) =>
		(
			await lines(reader, studyId)
				.where('u.recorded_at', '>', new Date(clock.now().getTime() - noticeDays * 86_400_000))
				.limit(10)
				.execute()
		).map(lineOf)
	);

/** Within a read: one subject's, for its record. */
export const unmaskingsOf = async (
	reader: Reader,
	studyId: string,
	subjectId: string
): Promise<(UnmaskingLine & { recordedAt: Date })[]> =>
	(await lines(reader, studyId).where('u.subject_id', '=', subjectId).execute()).map((row) => ({
		...lineOf(row),
		recordedAt: row.recorded_at
	}));

export interface UnmaskingSubject {
	number: string;
	site: string;
	kit: string | null;
	/** Whether there is an allocation that is kept from the site. */
	masked: boolean;
	mayUnmask: boolean;
	/** The names of those who are told. */
	told: string[];
	/** Now, by the site's clocks. */
	today: string;
	time: string;
}

/** What stands beside the act of unmasking one subject. */
export async function getUnmasking(
	actor: Actor,
	studyId: string,
	subjectId: string
): Promise<UnmaskingSubject> {
	const siteId = await siteOf(actor, 'unmasking.record', 'subject', studyId, subjectId);
	const scope = { studyId, siteId };
	return read(actor, 'unmasking.record', scope, async (reader) => {
		const subject = await reader
			.selectFrom('subject as s')
			.innerJoin('study as t', 't.id', 's.study_id')
			.select(['s.number', 's.kit_number', 't.masked'])
			.where('s.study_id', '=', studyId)
			.where('s.id', '=', subjectId)
			.executeTakeFirst();
		if (!subject) throw new Refusal('NOT_FOUND');
		const site = await getSite(reader, studyId, siteId);
		const told = await peopleWith(reader, studyId, siteId, toldRoles);
		const names =
			told.length === 0
				? []
				: await reader
						.selectFrom('person')
						.select('name')
						.where('id', 'in', told)
						.orderBy('name')
						.execute();
		return {
			number: subject.number,
			site: site.name,
			kit: subject.kit_number,
			masked: subject.masked && subject.kit_number !== null,
			mayUnmask: may(actor.grants, 'subject.unmask', scope),
			told: names.map((each) => each.name),
			today: site.today,
			time: timeInZone(clock.now(), site.zone)
		};
	});
}
