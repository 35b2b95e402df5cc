import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { actorFor } from '$lib/server/auth/actor';
import type { Actor } from '$lib/server/actor';
import { change, read, type Reader, type Writer } from '$lib/server/change';
import { beginRun, supervised } from '$lib/server/jobs/run';
import type { Delivery } from '$lib/server/jobs/worker';
import { takeTurn } from '../subject/screening.commands.server';
import { isRandomised } from '../study/definition';
import { getPublished } from '../study/study.reads.server';
import { levelsOf, listForStudy, type StudyList } from './allocation.server';

export interface AllocationState {
	/** The open record: how the list was made, its hash and count; never what it holds. */
	record: { method: string; hash: string; count: number; madeAt: Date; askedBy: string } | null;
	/** The newest try at making it, while there is no record. */
	job: { id: string; status: string; fraction: number; message: string } | null;
}

const newestJob = (reader: Reader, studyId: string) =>
	reader
		.selectFrom('job_run')
		.select(['id', 'status', 'fraction', 'message'])
		.where('study_id', '=', studyId)
		.where('queue', '=', 'allocation-list')
		.orderBy('id', 'desc')
		.limit(1)
		.executeTakeFirst();

export const getAllocationState = (actor: Actor, studyId: string): Promise<AllocationState> =>
	read(actor, 'study.read', { studyId }, async (reader) => {
		const record = await reader
			.selectFrom('allocation_record as a')
			.innerJoin('person as p', 'p.id', 'a.asked_by')
			.select(['a.method', 'a.hash', 'a.count', 'a.made_at as madeAt', 'p.name as askedBy'])
			.where('a.study_id', '=', studyId)
			.executeTakeFirst();
		return {
			record: record ?? null,
			job: record ? null : ((await newestJob(reader, studyId)) ?? null)
		};
	});

/** Asks the look worker to make the study's list. Once: a list that is there, or under way, is never made again. */
export const askForList = (actor: Actor, studyId: string): Promise<{ jobRunId: string }> =>
	change(actor, 'allocation.make', { studyId }, async (writer) => {
		await takeTurn(writer, 'allocation-list', studyId);
		await refuseSecondList(writer, studyId);
		const job = await newestJob(writer, studyId);
		if (job && (job.status === 'waiting' || job.status === 'running'))
			throw new Refusal('CONFLICT', { what: 'The list is being made already.' });
		const { definition } = await getPublished(writer, studyId);
		if (!isRandomised(definition))
			throw new Refusal('RULE', { why: 'This study has one arm: there is nothing to allocate.' });
		const jobRunId = await beginRun(writer, actor, {
			queue: 'allocation-list',
			title: 'Allocation list',
			studyId
		});
		await writer.enqueue('allocation-list', { studyId, askedBy: actor.personId, jobRunId });
		return { jobRunId };
	});

async function refuseSecondList(reader: Reader, studyId: string): Promise<void> {
	const there = await reader
		.selectFrom('allocation_record')
		.select('id')
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	if (there) throw new Refusal('LIST_EXISTS');
}

/** The look worker's part. Nothing of the list leaves this function but its hash and count. */
export const makeAllocationList = ({
	payload: { studyId, askedBy, jobRunId },
	lastTry
}: Delivery<'allocation-list'>): Promise<void> =>
	supervised(jobRunId, lastTry, async ({ progress }) => {
		const actor = await actorFor(askedBy, jobRunId);
		await progress(0.1, 'Making the list.');
		await change(actor, 'allocation.make', { studyId }, async (writer) => {
			await refuseSecondList(writer, studyId);
			const { definition } = await getPublished(writer, studyId);
			await writeList(writer, actor, studyId, listForStudy(definition));
		});
	});

/** Rows of one statement; PostgreSQL takes at most 65,535 parameters. */
const batch = 2000;

async function writeList(
	writer: Writer,
	actor: Actor,
	studyId: string,
	{ seed, blockSizes, list, letters }: StudyList
): Promise<void> {
	const listId = newId();
	await writer
		.insertInto('closed.allocation_list')
		.values({
			id: listId,
			study_id: studyId,
			seed,
			block_sizes: blockSizes,
			method: list.method,
			hash: list.hash
		})
		.execute();
	for (let from = 0; from < list.entries.length; from += batch)
		await writer
			.insertInto('closed.list_position')
			.values(
				list.entries.slice(from, from + batch).map((entry) => ({
					id: newId(),
					study_id: studyId,
					list_id: listId,
					stratum: JSON.stringify(levelsOf(entry.stratum)),
					position: entry.position,
					arm_key: entry.arm,
					kit_number: entry.kit
				}))
			)
			.execute();
	await writer
		.insertInto('closed.arm_letter')
		.values(letters.map(({ arm, letter }) => ({ study_id: studyId, arm_key: arm, letter })))
		.execute();
	await writer
		.insertInto('allocation_record')
		.values({
			id: newId(),
			study_id: studyId,
			method: list.method,
			hash: list.hash,
			count: list.count,
			asked_by: actor.personId
		})
		.execute();
}
