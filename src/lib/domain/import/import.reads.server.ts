import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read } from '$lib/server/change';
import { storage } from '$lib/server/storage/storage';
import { readHead } from './head';
import type { ImportRequest } from './import.input';
import { looksLikeAllocation, suggestMapping, type SuggestedMapping } from './mapping';

export interface ToldProblem {
	row: number | null;
	column: string | null;
	message: string;
}

export interface ImportSummary {
	problemCount: number;
	/** The first of them; all are in the file that lists them. */
	problems: ToldProblem[];
	subjects: number;
	newSubjects: number;
	visits: number;
	values: number;
	missing: number;
	/** The protocol version that the import publishes; null where the study has one. */
	protocol: { visits: string[]; measures: string[]; characteristics: string[] } | null;
}

export interface ImportHead {
	id: string;
	fileName: string;
	bytes: number;
	sha256: string;
	status: 'uploaded' | 'checking' | 'checked' | 'importing' | 'imported' | 'failed';
	problemCount: number | null;
	uploadedBy: string;
	createdAt: string;
}

export interface ImportBatch extends ImportHead {
	version: number;
	columns: string[];
	mapping: ImportRequest | null;
	summary: ImportSummary | null;
	jobRunId: string | null;
}

const columns = [
	'import_batch.id',
	'import_batch.file_name',
	'import_batch.bytes',
	'import_batch.sha256',
	'import_batch.status',
	'import_batch.created_at',
	'import_batch.summary',
	'person.name'
] as const;

interface HeadRow {
	id: string;
	file_name: string;
	bytes: number;
	sha256: string;
	status: ImportHead['status'];
	created_at: Date;
	summary: unknown;
	name: string;
}
const headOf = (row: HeadRow): ImportHead => ({
	id: row.id,
	fileName: row.file_name,
	bytes: row.bytes,
	sha256: row.sha256,
	status: row.status,
	problemCount: (row.summary as ImportSummary | null)?.problemCount ?? null,
	uploadedBy: row.name,
	createdAt: row.created_at.toISOString()
});

/** Newest first. */
export const findImports = (actor: Actor, studyId: string): Promise<ImportHead[]> =>
	read(actor, 'import.run', { studyId }, async (reader) =>
		(
			await reader
				.selectFrom('import_batch')
				.innerJoin('person', 'person.id', 'import_batch.uploaded_by')
				.select(columns)
				.where('import_batch.study_id', '=', studyId)
				.orderBy('import_batch.id', 'desc')
				.limit(100)
				.execute()
		).map(headOf)
	);

export const getImport = (actor: Actor, studyId: string, batchId: string): Promise<ImportBatch> =>
	read(actor, 'import.run', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('import_batch')
			.innerJoin('person', 'person.id', 'import_batch.uploaded_by')
			.select([
				...columns,
				'import_batch.version',
				'import_batch.headers',
				'import_batch.mapping',
				'import_batch.job_run_id'
			])
			.where('import_batch.id', '=', batchId)
			.where('import_batch.study_id', '=', studyId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return {
			...headOf(row),
			version: row.version,
			columns: (row.headers as unknown as { columns: string[] }).columns,
			mapping: row.mapping as unknown as ImportRequest | null,
			summary: row.summary as unknown as ImportSummary | null,
			jobRunId: row.job_run_id
		};
	});

const previewRows = 8;

/** The file's first rows and what they suggest. In a masked study nothing of an allocation is shown. */
export async function previewImport(
	actor: Actor,
	studyId: string,
	batchId: string
): Promise<{ rows: string[][]; suggestion: SuggestedMapping }> {
	const { key, masked } = await read(actor, 'import.run', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('import_batch')
			.innerJoin('study', 'study.id', 'import_batch.study_id')
			.select(['import_batch.storage_key as key', 'study.masked'])
			.where('import_batch.id', '=', batchId)
			.where('import_batch.study_id', '=', studyId)
			.executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return row;
	});
	const head = readHead(await (await storage()).get(key));
	if (!head.ok) throw new Refusal('RULE', { why: head.problem.message });
	const hidden = head.table.header.map((name) => masked && looksLikeAllocation(name));
	return {
		suggestion: suggestMapping(head.table),
		rows: head.table.rows
			.slice(0, previewRows)
			.map(({ cells }) => cells.map((cell, at) => (hidden[at] ? 'not shown' : cell.slice(0, 60))))
	};
}

export const problemsKey = (batchId: string) => `imports/${batchId}-problems.csv`;

/** The file that lists all problems of the last check. */
export async function problemsFile(
	actor: Actor,
	studyId: string,
	batchId: string
): Promise<Buffer> {
	const batch = await getImport(actor, studyId, batchId);
	if (!batch.summary || batch.summary.problemCount === 0) throw new Refusal('NOT_FOUND');
	return (await storage()).get(problemsKey(batch.id));
}
