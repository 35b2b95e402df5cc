import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, read } from '$lib/server/change';
import { beginRun } from '$lib/server/jobs/run';
import { sha256Of, storage } from '$lib/server/storage/storage';
import { isUtf8, readHead } from './head';
import type { ImportRequest } from './import.input';
import { checkMapping, looksLikeAllocation } from './mapping';
import { importLimits } from './table';

const limitWords = `${importLimits.bytes / 1024 / 1024} MB`;

/**
 * Takes a file in: whole, as text in UTF-8, with a header. In a masked study a column that looks like the allocation turns
 * the file away before any of it is kept.
 */
export async function uploadImport(
	actor: Actor,
	studyId: string,
	file: { name: string; bytes: Buffer }
): Promise<{ id: string; version: number; columns: string[]; bytes: number; sha256: string }> {
	const masked = await read(actor, 'import.run', { studyId }, async (reader) => {
		const study = await reader
			.selectFrom('study')
			.select('masked')
			.where('id', '=', studyId)
			.executeTakeFirst();
		if (!study) throw new Refusal('NOT_FOUND');
		return study.masked;
	});
	if (file.bytes.length > importLimits.bytes) throw new Refusal('TOO_LARGE', { limit: limitWords });
	const beside = (why: string) => new Refusal('RULE', { why }, { file: why });
	if (!isUtf8(file.bytes))
		throw beside('The file is not readable as UTF-8 text. Save it as “CSV UTF-8”.');
	const head = readHead(file.bytes);
	if (!head.ok) throw beside(head.problem.message);
	const columns = head.table.header;
	const allocation = masked ? columns.find(looksLikeAllocation) : undefined;
	if (allocation !== undefined)
		throw new Refusal(
			'RULE',
			{
				why: `The column “${allocation}” looks like the allocation, and this study is masked. Nothing of the file was kept. Take the column out: the independent statistician loads the allocation. If it is something else, rename it.`
			},
			{ file: `Take the column “${allocation}” out, or rename it.` }
		);
	const id = newId();
	const key = `imports/${id}.csv`;
	const sha256 = sha256Of(file.bytes);
	// The file first: a row never names a file that is not there.
	await (await storage()).put(key, file.bytes, 'text/csv');
	return change(actor, 'import.run', { studyId }, async (writer) => {
		const made = await writer
			.insertInto('import_batch')
			.values({
				id,
				study_id: studyId,
				file_name: file.name.slice(0, 200),
				storage_key: key,
				sha256,
				bytes: file.bytes.length,
				headers: JSON.stringify({ columns, delimiter: head.table.delimiter }),
				uploaded_by: actor.personId
			})
			.returning('version')
			.executeTakeFirstOrThrow();
		return { id, version: made.version, columns, bytes: file.bytes.length, sha256 };
	});
}

const changeable = ['uploaded', 'checked', 'failed'] as const;

/** Says which column holds what. A check made before is forgotten with the old mapping. */
export const mapImport = (
	actor: Actor,
	studyId: string,
	batchId: string,
	version: number,
	request: ImportRequest
): Promise<{ version: number }> =>
	change(actor, 'import.run', { studyId }, async (writer) => {
		const batch = await writer
			.selectFrom('import_batch')
			.innerJoin('study', 'study.id', 'import_batch.study_id')
			.select(['import_batch.status', 'import_batch.headers', 'study.masked'])
			.where('import_batch.id', '=', batchId)
			.where('import_batch.study_id', '=', studyId)
			.executeTakeFirst();
		if (!batch) throw new Refusal('NOT_FOUND');
		if (!(changeable as readonly string[]).includes(batch.status))
			throw new Refusal('CONFLICT', { what: `This file is ${batch.status}: its mapping stays.` });
		if (request.allocation !== undefined)
			throw batch.masked
				? new Refusal('MASKED_ALLOCATION')
				: new Refusal('MAPPING', {
						why: 'An allocation is not imported with the measurements. Leave the column out.'
					});
		const { columns } = batch.headers as unknown as { columns: string[] };
		const extra = request.site.kind === 'column' ? [request.site.column] : [];
		const unknown = extra.find((column) => !columns.includes(column));
		if (unknown)
			throw new Refusal('MAPPING', { why: `The file has no column called “${unknown}”.` });
		const { site: _, ...mapping } = request;
		const problems = checkMapping(columns, mapping, { masked: batch.masked });
		if (problems.length > 0)
			throw new Refusal('MAPPING', {
				why: problems.map(({ problem }) => problem.message).join(' ')
			});
		const changed = await writer
			.updateTable('import_batch')
			.set({ mapping: JSON.stringify(request), status: 'uploaded', summary: null })
			.where('id', '=', batchId)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version };
	});

/** Begins the check (a dry run), or the import itself, which a clean check must precede. */
export const startImport = (
	actor: Actor,
	studyId: string,
	batchId: string,
	{ dryRun }: { dryRun: boolean }
): Promise<{ jobRunId: string; version: number }> =>
	change(actor, 'import.run', { studyId }, async (writer) => {
		const batch = await writer
			.selectFrom('import_batch')
			.select(['status', 'mapping', 'summary', 'file_name'])
			.where('id', '=', batchId)
			.where('study_id', '=', studyId)
			.forUpdate()
			.executeTakeFirst();
		if (!batch) throw new Refusal('NOT_FOUND');
		if (batch.status === 'checking' || batch.status === 'importing')
			throw new Refusal('CONFLICT', { what: 'Work on this file is under way already.' });
		if (batch.status === 'imported')
			throw new Refusal('CONFLICT', { what: 'This file was imported already.' });
		if (!batch.mapping) throw new Refusal('MAPPING', { why: 'Say first which column holds what.' });
		const summary = batch.summary as unknown as { problemCount: number } | null;
		if (!dryRun && (batch.status !== 'checked' || summary?.problemCount !== 0))
			throw new Refusal('CONFLICT', {
				what: 'A file is imported after a check that found no problem.'
			});
		const jobRunId = await beginRun(writer, actor, {
			queue: 'import',
			title: `${dryRun ? 'Check of' : 'Import of'} ${batch.file_name}`.slice(0, 200),
			studyId
		});
		const [changed] = await writer
			.updateTable('import_batch')
			.set({ status: dryRun ? 'checking' : 'importing', job_run_id: jobRunId })
			.where('id', '=', batchId)
			.returning('version')
			.execute();
		await writer.enqueue('import', { batchId, jobRunId, dryRun });
		return { jobRunId, version: changed?.version ?? 0 };
	});
