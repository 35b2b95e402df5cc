import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { actorFor } from '$lib/server/auth/actor';
import type { Actor } from '$lib/server/actor';
import { change, read, type Reader, type Writer } from '$lib/server/change';
import { beginRun, supervised } from '$lib/server/jobs/run';
import type { Delivery } from '$lib/server/jobs/worker';
import { takeTurn } from '../subject/screening.commands.server';
import { isRandomised, type StudyDefinition } from '../study/definition';
import type { AskForListInput } from './allocation.input';
import { getPublished } from '../study/study.reads.server';
import {
	levelsOf,
	listForStudy,
	minimisationForStudy,
	usualChance,
	type ListSource
} from './allocation.server';
import { minimises } from '../study/allocation-method';

export interface AllocationState {
	/** The open record: how the list was made, its hash and count; never what it holds. */
	record: { method: string; hash: string; count: number; madeAt: Date; askedBy: string } | null;
	/** Subjects randomised so far, over all arms. */
	used: number;
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
		const used = await reader
			.selectFrom('subject')
			.select((eb) => eb.fn.countAll<string>().as('n'))
			.where('study_id', '=', studyId)
			.where('randomised_at', 'is not', null)
			.executeTakeFirstOrThrow();
		return {
			record: record ?? null,
			used: Number(used.n),
			job: record ? null : ((await newestJob(reader, studyId)) ?? null)
		};
	});

/**
 * Asks the look worker to make the study's list. Once: a list that is there, or under way, is never made again. The chance
 * of minimisation goes to the closed side at once; the job carries ids only.
 */
export const askForList = (
	actor: Actor,
	studyId: string,
	{ bestChance }: AskForListInput = {}
): Promise<{ jobRunId: string }> =>
	change(actor, 'allocation.make', { studyId }, async (writer) => {
		await takeTurn(writer, 'allocation-list', studyId);
		await refuseSecondList(writer, studyId);
		const job = await newestJob(writer, studyId);
		if (job && (job.status === 'waiting' || job.status === 'running'))
			throw new Refusal('CONFLICT', { what: 'The list is being made already.' });
		const { definition } = await getPublished(writer, studyId);
		if (!isRandomised(definition))
			throw new Refusal('RULE', { why: 'This study has one arm: there is nothing to allocate.' });
		if (minimises(definition))
			await sql`select closed.choose_chance(${studyId}::uuid, ${bestChance ?? usualChance}::numeric)`.execute(
				writer
			);
		else if (bestChance !== undefined)
			throw new Refusal(
				'INVALID',
				{},
				{ bestChance: 'This study allocates by permuted blocks: there is no chance to choose.' }
			);
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
			if (minimises(definition)) await writeMinimisation(writer, actor, studyId, definition);
			else await writeBlocks(writer, actor, studyId, definition);
		});
	});

async function chosenChance(reader: Reader, studyId: string): Promise<number> {
	const chosen = await reader
		.selectFrom('closed.minimisation_choice')
		.select('best_chance')
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	return chosen?.best_chance ?? usualChance;
}

async function writeBlocks(
	writer: Writer,
	actor: Actor,
	studyId: string,
	definition: StudyDefinition
): Promise<void> {
	const { seed, source, blockSizes, list, letters } = listForStudy(definition);
	const listId = await writeHead(writer, actor, studyId, {
		seed,
		source,
		blockSizes,
		letters,
		method: list.method,
		hash: list.hash,
		count: list.count
	});
	await writePlaces(
		writer,
		studyId,
		listId,
		list.entries.map((entry) => ({ ...entry, levels: levelsOf(entry.stratum) }))
	);
}

async function writeMinimisation(
	writer: Writer,
	actor: Actor,
	studyId: string,
	definition: StudyDefinition
): Promise<void> {
	const { seed, source, made, letters } = minimisationForStudy(
		definition,
		await chosenChance(writer, studyId)
	);
	const listId = await writeHead(writer, actor, studyId, {
		seed,
		source,
		blockSizes: [],
		letters,
		method: made.method,
		hash: made.hash,
		count: made.count
	});
	await writer
		.insertInto('closed.minimisation')
		.values({
			list_id: listId,
			study_id: studyId,
			arms: JSON.stringify(source.arms),
			best_chance: source.bestChance,
			random_below: String(made.randomBelow)
		})
		.execute();
	for (let from = 0; from < made.chances.length; from += batch)
		await writer
			.insertInto('closed.chance')
			.values(
				made.chances.slice(from, from + batch).map(({ position, coin, draw }) => ({
					list_id: listId,
					study_id: studyId,
					position,
					coin: String(coin),
					draw: String(draw)
				}))
			)
			.execute();
	await writePlaces(
		writer,
		studyId,
		listId,
		made.kits.map((each) => ({ ...each, levels: {} }))
	);
}

async function writeHead(
	writer: Writer,
	actor: Actor,
	studyId: string,
	head: {
		seed: string;
		source: ListSource;
		blockSizes: number[];
		letters: { arm: string; letter: string }[];
		method: string;
		hash: string;
		count: number;
	}
): Promise<string> {
	const listId = newId();
	await writer
		.insertInto('closed.allocation_list')
		.values({
			id: listId,
			study_id: studyId,
			seed: head.seed,
			block_sizes: head.blockSizes,
			method: head.method,
			hash: head.hash,
			plan: JSON.stringify(head.source)
		})
		.execute();
	await writer
		.insertInto('closed.arm_letter')
		.values(head.letters.map(({ arm, letter }) => ({ study_id: studyId, arm_key: arm, letter })))
		.execute();
	await writer
		.insertInto('allocation_record')
		.values({
			id: newId(),
			study_id: studyId,
			method: head.method,
			hash: head.hash,
			count: head.count,
			asked_by: actor.personId
		})
		.execute();
	return listId;
}

/** Rows of one statement; PostgreSQL takes at most 65,535 parameters. */
const batch = 2000;

async function writePlaces(
	writer: Writer,
	studyId: string,
	listId: string,
	places: { levels: Record<string, string>; position: number; arm: string; kit: string }[]
): Promise<void> {
	for (let from = 0; from < places.length; from += batch)
		await writer
			.insertInto('closed.list_position')
			.values(
				places.slice(from, from + batch).map(({ levels, position, arm, kit }) => ({
					id: newId(),
					study_id: studyId,
					list_id: listId,
					stratum: JSON.stringify(levels),
					position,
					arm_key: arm,
					kit_number: kit
				}))
			)
			.execute();
}
