import type { ImportRequest } from './import.input';
import { checkRows, type CheckedRows } from './rows';
import { readTable, type ImportProblem } from './table';

/** So many problems are kept for the file that lists them; all are counted. */
export const mostListed = 100_000;

export type ReadFile =
	| { ok: true; checked: CheckedRows }
	| { ok: false; problems: ImportProblem[]; problemCount: number };

/** A file against its mapping. The site's column goes along as one more thing that must stay the same for a subject. */
export async function readFile(
	bytes: Buffer,
	request: ImportRequest,
	masked: boolean
): Promise<ReadFile> {
	const read = await readTable([bytes]);
	if (!read.ok) return { ok: false, problems: read.problems, problemCount: read.problems.length };
	const { site, ...mapping } = request;
	const checked = checkRows(
		read.table,
		{
			...mapping,
			covariates: [
				...mapping.covariates,
				...(site.kind === 'column'
					? [
							{
								column: site.column,
								name: 'Site of the subject',
								kind: 'choice' as const,
								varies: false
							}
						]
					: [])
			]
		},
		{ masked, mostProblems: mostListed }
	);
	return { ok: true, checked };
}
