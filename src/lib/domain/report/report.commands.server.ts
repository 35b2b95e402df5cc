import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Reader, type Writer } from '$lib/server/change';
import { beginRun } from '$lib/server/jobs/run';
import { may } from '$lib/server/permission';
import type { ReleaseInput } from './report.input';

/** People who sit on this study's board today. */
export async function boardOf(
	reader: Reader,
	studyId: string
): Promise<{ id: string; name: string }[]> {
	const { rows } = await sql<{ id: string; name: string }>`
		select distinct p.id, p.name from app.person_role r join app.person p on p.id = r.person_id
		where r.study_id = ${studyId}::uuid and r.role = 'board_member' and p.active
			and app.in_force(r, (app.now() at time zone 'UTC')::date)
		order by p.name`.execute(reader);
	return rows;
}

/** Closed things are only for those who may see by arm, whatever else their role allows. */
function mustSeeArms(actor: Actor, studyId: string): void {
	if (!may(actor.grants, 'look.by-arm', { studyId })) throw new Refusal('NOT_PERMITTED');
}

/** Begins the report of a finished look; a failed one is begun again. */
export const makeReport = (
	actor: Actor,
	studyId: string,
	lookId: string
): Promise<{ id: string; jobRunId: string }> =>
	change(actor, 'report.make', { studyId }, async (writer) => {
		const look = await writer
			.selectFrom('look')
			.select(['id', 'number', 'kind', 'status'])
			.where('id', '=', lookId)
			.where('study_id', '=', studyId)
			.forUpdate()
			.executeTakeFirst();
		if (!look) throw new Refusal('NOT_FOUND');
		if (look.kind === 'by arm') mustSeeArms(actor, studyId);
		if (look.status !== 'done') throw new Refusal('LOOK_NOT_READY');
		const before = await writer
			.selectFrom('report')
			.select(['id', 'status'])
			.where('look_id', '=', lookId)
			.executeTakeFirst();
		if (before && before.status !== 'failed')
			throw new Refusal('CONFLICT', { what: 'This look has its report already.' });
		const queue = look.kind === 'by arm' ? 'closed-report' : 'report';
		const jobRunId = await beginRun(writer, actor, {
			queue,
			title: `Report of look ${look.number}`,
			studyId
		});
		const id = before?.id ?? newId();
		if (before)
			await writer
				.updateTable('report')
				.set({ status: 'waiting', error: null, job_run_id: jobRunId, made_by: actor.personId })
				.where('id', '=', id)
				.execute();
		else
			await writer
				.insertInto('report')
				.values({
					id,
					study_id: studyId,
					look_id: lookId,
					kind: look.kind === 'by arm' ? 'closed' : 'open',
					job_run_id: jobRunId,
					made_by: actor.personId
				})
				.execute();
		await writer.enqueue(queue, { reportId: id, jobRunId });
		return { id, jobRunId };
	});

async function reportToRelease(writer: Writer, studyId: string, reportId: string) {
	const report = await writer
		.selectFrom('report')
		.select(['id', 'kind', 'status'])
		.where('id', '=', reportId)
		.where('study_id', '=', studyId)
		.forUpdate()
		.executeTakeFirst();
	if (!report) throw new Refusal('NOT_FOUND');
	if (report.status !== 'made') throw new Refusal('REPORT_NOT_READY');
	return report;
}

/**
 * Releases a report to named board members. An open one is theirs at once; for a closed one this asks, and a second person
 * approves. Whoever has a copy already is left out.
 */
export const releaseReport = (
	actor: Actor,
	studyId: string,
	reportId: string,
	input: ReleaseInput
): Promise<{ releases: { id: string; personId: string; status: 'asked' | 'approved' }[] }> =>
	change(actor, 'report.release', { studyId }, async (writer) => {
		const report = await reportToRelease(writer, studyId, reportId);
		if (report.kind === 'closed') mustSeeArms(actor, studyId);
		const board = new Set((await boardOf(writer, studyId)).map(({ id }) => id));
		if (input.people.some((person) => !board.has(person)))
			throw new Refusal('INVALID', {}, { people: 'Choose board members of this study.' });
		const had = new Set(
			(
				await writer
					.selectFrom('release')
					.select('person_id')
					.where('report_id', '=', reportId)
					.execute()
			).map(({ person_id }) => person_id)
		);
		const people = [...new Set(input.people)].filter((person) => !had.has(person));
		if (people.length === 0)
			throw new Refusal('CONFLICT', { what: 'The report was released to them already.' });
		const {
			rows: [moment]
		} = await sql<{ now: Date }>`select app.now() as now`.execute(writer);
		const open = report.kind === 'open';
		const releases = people.map((personId) => ({
			id: newId(),
			personId,
			status: open ? ('approved' as const) : ('asked' as const)
		}));
		for (const release of releases) {
			await writer
				.insertInto('release')
				.values({
					id: release.id,
					study_id: studyId,
					report_id: reportId,
					person_id: release.personId,
					status: release.status,
					asked_by: actor.personId,
					approved_at: open ? (moment?.now as Date) : null
				})
				.execute();
			if (open) await writer.enqueue('release', { releaseId: release.id });
		}
		return { releases };
	});

/** The second person's part: the copy is made for the board member named. */
export const approveRelease = (actor: Actor, studyId: string, releaseId: string): Promise<void> =>
	change(actor, 'report.approve-release', { studyId }, async (writer) => {
		const release = await writer
			.selectFrom('release')
			.innerJoin('report', 'report.id', 'release.report_id')
			.select([
				'release.id',
				'release.status',
				'release.asked_by',
				'release.person_id',
				'report.kind'
			])
			.where('release.id', '=', releaseId)
			.where('release.study_id', '=', studyId)
			.executeTakeFirst();
		if (!release) throw new Refusal('NOT_FOUND');
		if (release.asked_by === actor.personId) throw new Refusal('SECOND_PERSON');
		if (release.status !== 'asked')
			throw new Refusal('CONFLICT', { what: 'This release was approved already.' });
		const board = await boardOf(writer, studyId);
		if (!board.some(({ id }) => id === release.person_id))
			throw new Refusal('CONFLICT', { what: 'This person is no longer on the board.' });
		const changed = await writer
			.updateTable('release')
			.set((eb) => ({
				status: 'approved' as const,
				approved_by: actor.personId,
				approved_at: eb.fn<Date>('app.now', [])
			}))
			.where('id', '=', releaseId)
			.where('status', '=', 'asked')
			.returning('id')
			.execute();
		if (changed.length === 0)
			throw new Refusal('CONFLICT', { what: 'This release was approved already.' });
		await writer.enqueue(release.kind === 'closed' ? 'closed-release' : 'release', { releaseId });
	});
