import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { boardOf } from './report.commands.server';

export interface ReleaseHead {
	id: string;
	person: string;
	status: 'asked' | 'approved' | 'ready' | 'failed';
	askedBy: string;
	askedAt: string;
	approvedBy: string | null;
	downloads: number;
	/** Whether this very person asked, so that somebody else has to approve. */
	mine: boolean;
}

export interface ReportHead {
	id: string;
	kind: 'open' | 'closed';
	status: 'waiting' | 'made' | 'failed';
	error: string | null;
	sha256: string | null;
	pages: number | null;
	jobRunId: string | null;
	madeAt: string | null;
	releases: ReleaseHead[];
}

/** The report of a look with its releases, and the board members it may go to. */
export const findReport = (
	actor: Actor,
	studyId: string,
	lookId: string
): Promise<{ report: ReportHead | null; board: { id: string; name: string }[] }> =>
	read(actor, 'report.read', { studyId }, async (reader) => {
		const board = await boardOf(reader, studyId);
		const row = await reader
			.selectFrom('report')
			.selectAll()
			.where('look_id', '=', lookId)
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		if (!row) return { report: null, board };
		const releases = await reader
			.selectFrom('release')
			.innerJoin('person', 'person.id', 'release.person_id')
			.innerJoin('person as asker', 'asker.id', 'release.asked_by')
			.leftJoin('person as approver', 'approver.id', 'release.approved_by')
			.select((eb) => [
				'release.id',
				'release.status',
				'release.asked_by as asker_id',
				'release.asked_at',
				'person.id as person_id',
				'person.name as person',
				'asker.name as asked_by',
				'approver.name as approved_by',
				eb
					.selectFrom('download')
					.select((count) => count.fn.countAll<string>().as('n'))
					.whereRef('download.report_id', '=', 'release.report_id')
					.whereRef('download.person_id', '=', 'release.person_id')
					.as('downloads')
			])
			.where('release.report_id', '=', row.id)
			.where('release.study_id', '=', studyId)
			.orderBy('person.name')
			.execute();
		return {
			board: board.filter(({ id }) => !releases.some(({ person_id }) => person_id === id)),
			report: {
				id: row.id,
				kind: row.kind,
				status: row.status,
				error: row.error,
				sha256: row.sha256,
				pages: row.pages,
				jobRunId: row.job_run_id,
				madeAt: row.made_at?.toISOString() ?? null,
				releases: releases.map((release) => ({
					id: release.id,
					person: release.person,
					status: release.status,
					askedBy: release.asked_by,
					askedAt: release.asked_at.toISOString(),
					approvedBy: release.approved_by,
					downloads: Number(release.downloads ?? 0),
					mine: release.asker_id === actor.personId
				}))
			}
		};
	});

/** Closed releases that wait for a second person, for whoever may be that person. */
export const findWaitingReleases = (actor: Actor, studyId: string) =>
	read(actor, 'report.approve-release', { studyId }, async (reader) => {
		const rows = await reader
			.selectFrom('release')
			.innerJoin('report', 'report.id', 'release.report_id')
			.innerJoin('look', 'look.id', 'report.look_id')
			.innerJoin('person', 'person.id', 'release.person_id')
			.innerJoin('person as asker', 'asker.id', 'release.asked_by')
			.select([
				'release.id',
				'look.id as look_id',
				'look.number',
				'person.name as person',
				'asker.name as asked_by',
				'release.asked_by as asker_id',
				'release.asked_at'
			])
			.where('release.study_id', '=', studyId)
			.where('release.status', '=', 'asked')
			.orderBy('release.asked_at')
			.execute();
		return rows.map((row) => ({
			id: row.id,
			lookId: row.look_id,
			look: row.number,
			person: row.person,
			askedBy: row.asked_by,
			askedAt: row.asked_at.toISOString(),
			mine: row.asker_id === actor.personId
		}));
	});

/** The same for the API: a look's report, or nothing there. A closed one is for those who may see by arm. */
export async function getReport(
	actor: Actor,
	studyId: string,
	lookId: string
): Promise<ReportHead> {
	const { report } = await findReport(actor, studyId, lookId);
	if (!report || (report.kind === 'closed' && !may(actor.grants, 'look.by-arm', { studyId })))
		throw new Refusal('NOT_FOUND');
	return report;
}
