import { stringify } from 'csv-stringify/sync';
import { sql } from 'kysely';
import { plainCell } from '$lib/domain/cut/cut.export';
import { importRequest, type ImportRequest } from '$lib/domain/import/import.input';
import { problemsKey, type ImportSummary } from '$lib/domain/import/import.reads.server';
import { planImport, type ImportPlan } from '$lib/domain/import/plan';
import { mostListed, readFile, type ReadFile } from '$lib/domain/import/read-file.server';
import type { ImportProblem } from '$lib/domain/import/table';
import { Refusal } from '$lib/refusal';
import type { Actor } from '../actor';
import { systemActor } from '../actor';
import { actorFor } from '../auth/actor';
import { change, read, type Reader, type Writer } from '../change';
import { supervised, type Supervision } from '../jobs/run';
import type { Delivery } from '../jobs/worker';
import { storage } from '../storage/storage';
import { studyNow } from './study-now';
import { writePlan } from './write';

const shown = 500;

interface Batch {
	id: string;
	studyId: string;
	storageKey: string;
	request: ImportRequest;
}

const findBatch = (actorId: string, batchId: string) =>
	read(systemActor(actorId), 'job.read', {}, async (reader): Promise<Batch> => {
		const row = await reader
			.selectFrom('import_batch')
			.select(['id', 'study_id', 'storage_key', 'mapping'])
			.where('id', '=', batchId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return {
			id: row.id,
			studyId: row.study_id,
			storageKey: row.storage_key,
			request: importRequest.parse(row.mapping)
		};
	});

const tell = ({ row, column, problem }: ImportProblem) => ({
	row,
	column,
	message: problem.message
});

function summaryOf(
	read: ReadFile,
	plan: ImportPlan | null
): { summary: ImportSummary; all: ImportProblem[] } {
	const all = plan?.problems ?? (read.ok ? read.checked.problems : read.problems);
	const checked = read.ok ? read.checked : null;
	const definition = plan?.definition ?? null;
	return {
		all,
		summary: {
			problemCount: plan?.problemCount ?? (read.ok ? read.checked.problemCount : read.problemCount),
			problems: all.slice(0, shown).map(tell),
			subjects: checked?.subjects.length ?? 0,
			newSubjects: plan?.subjects.filter(({ id }) => id === null).length ?? 0,
			visits: checked?.rows.length ?? 0,
			values: checked?.valueCount ?? 0,
			missing: checked?.missingCount ?? 0,
			protocol: definition
				? {
						visits: definition.visits.map(({ name }) => name),
						measures: definition.measures.map(({ name }) => name),
						characteristics: definition.characteristics.map(({ name }) => name)
					}
				: null
		}
	};
}

/** Keeps the list of all problems beside the file; the first of them stand with the batch. */
async function keepProblems(batchId: string, all: readonly ImportProblem[]): Promise<void> {
	if (all.length === 0) return;
	const rows = all.map(({ row, column, problem }) =>
		[row === null ? '' : String(row), column ?? '', problem.message].map(plainCell)
	);
	const text = stringify([['row', 'column', 'problem'], ...rows], { record_delimiter: '\r\n' });
	await (await storage()).put(problemsKey(batchId), Buffer.from(text, 'utf8'), 'text/csv');
}

const setBatch = (
	actorId: string,
	batchId: string,
	values: {
		status: 'uploaded' | 'checking' | 'checked' | 'importing' | 'imported' | 'failed';
		summary?: string;
	}
) =>
	change(systemActor(actorId), 'job.read', {}, (writer) =>
		writer.updateTable('import_batch').set(values).where('id', '=', batchId).execute()
	);

async function planFor(
	reader: Reader,
	batch: Batch,
	bytes: Buffer
): Promise<{ read: ReadFile; plan: ImportPlan | null; version: { id: string; version: number } }> {
	const now = await studyNow(reader, batch.studyId);
	const file = await readFile(bytes, batch.request, now.masked);
	const plan = file.ok ? planImport(batch.request, file.checked, now, mostListed) : null;
	return { read: file, plan, version: now.protocolVersion };
}

/** The check: everything but the writing. */
async function check(batch: Batch, actor: Actor, jobRunId: string, supervision: Supervision) {
	await supervision.progress(0.1, 'Reading the file.');
	const bytes = await (await storage()).get(batch.storageKey);
	await supervision.progress(0.3, 'Checking every row.');
	const found = await read(actor, 'import.run', { studyId: batch.studyId }, (reader) =>
		planFor(reader, batch, bytes)
	);
	const { summary, all } = summaryOf(found.read, found.plan);
	await supervision.progress(0.8, 'Listing what was found.');
	await keepProblems(batch.id, all);
	await setBatch(jobRunId, batch.id, { status: 'checked', summary: JSON.stringify(summary) });
}

/** The import: checked once more against the study as it is, then all of it or nothing. */
async function run(batch: Batch, actor: Actor, supervision: Supervision) {
	await supervision.progress(0.05, 'Reading the file.');
	const bytes = await (await storage()).get(batch.storageKey);
	await change(actor, 'import.run', { studyId: batch.studyId }, async (writer: Writer) => {
		// One import of a study at a time, or two could each find the other's subjects missing.
		await sql`select pg_advisory_xact_lock(hashtextextended(${`import:${batch.studyId}`}, 0))`.execute(
			writer
		);
		await supervision.progress(0.1, 'Checking every row once more.');
		const found = await planFor(writer, batch, bytes);
		const { summary } = summaryOf(found.read, found.plan);
		if (!found.plan || summary.problemCount > 0)
			throw new Refusal('RULE', {
				why: `Since the check the study has changed: there ${summary.problemCount === 1 ? 'is 1 problem' : `are ${summary.problemCount} problems`} now. Nothing was imported. Check the file again.`
			});
		await writePlan(writer, actor, batch.studyId, found.version, found.plan, (fraction, message) =>
			supervision.progress(fraction, message)
		);
		await writer
			.updateTable('import_batch')
			.set({ status: 'imported', summary: JSON.stringify(summary) })
			.where('id', '=', batch.id)
			.execute();
	});
}

/** Works for whoever asked, with the roles they hold now. */
export async function importJob({
	payload: { batchId, jobRunId, dryRun },
	lastTry
}: Delivery<'import'>): Promise<void> {
	const before = dryRun ? 'uploaded' : 'checked';
	try {
		await supervised(jobRunId, lastTry, async (supervision, requestedBy) => {
			const batch = await findBatch(jobRunId, batchId);
			const actor = await actorFor(requestedBy, jobRunId);
			if (dryRun) await check(batch, actor, jobRunId, supervision);
			else await run(batch, actor, supervision);
		});
	} catch (thrown) {
		if (lastTry || thrown instanceof Refusal)
			await setBatch(jobRunId, batchId, { status: 'failed' });
		throw thrown;
	}
	const ended = await read(systemActor(jobRunId), 'job.read', {}, (reader) =>
		reader.selectFrom('job_run').select('status').where('id', '=', jobRunId).executeTakeFirst()
	);
	if (ended?.status === 'cancelled') await setBatch(jobRunId, batchId, { status: before });
}
