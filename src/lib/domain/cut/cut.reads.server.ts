import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import type { CutContent } from './content';

export interface CutHead {
	id: string;
	number: number;
	label: string;
	cutOffAt: string;
	extractedAt: string;
	madeBy: string;
	subjects: number;
	measurements: number;
	fingerprint: string;
}

const heads = (reader: Reader, studyId: string) =>
	reader
		.selectFrom('cut')
		.innerJoin('person', 'person.id', 'cut.made_by')
		.select([
			'cut.id',
			'cut.number',
			'cut.label',
			'cut.cut_off_at',
			'cut.extracted_at',
			'person.name as made_by',
			'cut.subjects',
			'cut.measurements',
			'cut.fingerprint'
		])
		.where('cut.study_id', '=', studyId);

type Row = Awaited<ReturnType<ReturnType<typeof heads>['execute']>>[number];
const headOf = (row: Row): CutHead => ({
	id: row.id,
	number: row.number,
	label: row.label,
	cutOffAt: row.cut_off_at.toISOString(),
	extractedAt: row.extracted_at.toISOString(),
	madeBy: row.made_by,
	subjects: row.subjects,
	measurements: row.measurements,
	fingerprint: row.fingerprint
});

/** Newest first. */
export const findCuts = (actor: Actor, studyId: string): Promise<CutHead[]> =>
	read(actor, 'cut.read', { studyId }, async (reader) =>
		(await heads(reader, studyId).orderBy('cut.number', 'desc').execute()).map(headOf)
	);

export const getCut = (actor: Actor, studyId: string, cutId: string): Promise<CutHead> =>
	read(actor, 'cut.read', { studyId }, async (reader) => {
		const row = await heads(reader, studyId).where('cut.id', '=', cutId).executeTakeFirst();
		if (!row) throw new Refusal('NOT_FOUND');
		return headOf(row);
	});

/** The frozen content, for the programs that work on it. */
export async function contentOf(
	reader: Reader,
	studyId: string,
	cutId: string
): Promise<{ content: CutContent; head: CutHead }> {
	const row = await heads(reader, studyId).where('cut.id', '=', cutId).executeTakeFirst();
	const held = await reader
		.selectFrom('cut')
		.select('content')
		.where('study_id', '=', studyId)
		.where('id', '=', cutId)
		.executeTakeFirst();
	if (!row || !held) throw new Refusal('NOT_FOUND');
	return { content: JSON.parse(held.content) as CutContent, head: headOf(row) };
}
