import type { Actor } from '$lib/server/actor';
import { read, readOwn, type Reader } from '$lib/server/change';
import { Refusal } from '$lib/refusal';
import type { StudyDefinition } from './definition';
import { readDefinition } from './template';

export interface StudyHead {
	id: string;
	code: string;
	name: string;
	masked: boolean;
	training: boolean;
	status: 'draft' | 'open' | 'ended';
	version: number;
}

/** The studies in which the actor has a part; an administrator as such has none. */
export const findStudies = (actor: Actor): Promise<StudyHead[]> =>
	readOwn(actor, (reader) =>
		reader
			.selectFrom('study')
			.select(['id', 'code', 'name', 'masked', 'training', 'status', 'version'])
			.orderBy('code')
			.execute()
	);

export const getStudy = (actor: Actor, studyId: string): Promise<StudyHead> =>
	read(actor, 'study.enter', { studyId }, async (reader) => {
		const found = await reader
			.selectFrom('study')
			.select(['id', 'code', 'name', 'masked', 'training', 'status', 'version'])
			.where('id', '=', studyId)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		return found;
	});

export interface SiteHead {
	id: string;
	code: string;
	name: string;
	zone: string;
}

/** The sites of the study that the actor may see. */
export const findSites = (actor: Actor, studyId: string): Promise<SiteHead[]> =>
	read(actor, 'study.enter', { studyId }, async (reader) => {
		const mine = actor.grants.filter((g) => g.studyId === null || g.studyId === studyId);
		const all = mine.some((g) => g.siteId === null);
		return reader
			.selectFrom('site')
			.select(['id', 'code', 'name', 'zone'])
			.where('study_id', '=', studyId)
			.$if(!all, (q) =>
				q.where(
					'id',
					'in',
					mine.map((g) => g.siteId as string)
				)
			)
			.orderBy('code')
			.execute();
	});

export interface ProtocolVersion {
	id: string;
	number: number;
	status: 'draft' | 'published';
	publishedAt: Date | null;
	publishedBy: string | null;
	version: number;
	definition: StudyDefinition;
}

function held(definition: unknown): StudyDefinition {
	const read = readDefinition(definition);
	if (!read.ok) throw new Error('A stored study definition does not hold.');
	return read.definition;
}

/** Within a read or a change: the newest published version with its definition. */
export async function findPublished(
	reader: Reader,
	studyId: string
): Promise<{ id: string; number: number; definition: StudyDefinition } | undefined> {
	const found = await reader
		.selectFrom('protocol_version')
		.select(['id', 'number', 'definition'])
		.where('study_id', '=', studyId)
		.where('status', '=', 'published')
		.orderBy('number', 'desc')
		.limit(1)
		.executeTakeFirst();
	return found && { ...found, definition: held(found.definition) };
}

/** Within a read or a change: the newest published version; refused where there is none. */
export async function getPublished(reader: Reader, studyId: string) {
	const found = await findPublished(reader, studyId);
	if (!found) throw new Refusal('NOT_PUBLISHED');
	return found;
}

/** Within a read or a change: one version's definition. */
export async function getDefinition(
	reader: Reader,
	studyId: string,
	protocolVersionId: string
): Promise<StudyDefinition> {
	const found = await reader
		.selectFrom('protocol_version')
		.select('definition')
		.where('study_id', '=', studyId)
		.where('id', '=', protocolVersionId)
		.executeTakeFirst();
	if (!found) throw new Refusal('NOT_FOUND');
	return held(found.definition);
}

/** Within a read or a change: the definition of a published version by its number. */
export async function getVersionByNumber(
	reader: Reader,
	studyId: string,
	number: number
): Promise<StudyDefinition> {
	const found = await reader
		.selectFrom('protocol_version')
		.select('definition')
		.where('study_id', '=', studyId)
		.where('number', '=', number)
		.where('status', '=', 'published')
		.executeTakeFirst();
	if (!found) throw new Refusal('NOT_FOUND');
	return held(found.definition);
}

/** Within a read or a change: the number of the newest published version of each of these studies. */
export async function publishedNumbers(
	reader: Reader,
	studyIds: readonly string[]
): Promise<Map<string, number>> {
	if (studyIds.length === 0) return new Map();
	const rows = await reader
		.selectFrom('protocol_version')
		.select((e) => ['study_id', e.fn.max('number').as('number')])
		.where('study_id', 'in', studyIds)
		.where('status', '=', 'published')
		.groupBy('study_id')
		.execute();
	return new Map(rows.map((row) => [row.study_id, row.number]));
}

/** The newest protocol version, draft or published, with the sites as they stand. */
export const getProtocol = (actor: Actor, studyId: string): Promise<ProtocolVersion> =>
	read(actor, 'study.read', { studyId }, async (reader) => {
		const found = await reader
			.selectFrom('protocol_version')
			.leftJoin('person', 'person.id', 'protocol_version.published_by')
			.select([
				'protocol_version.id',
				'number',
				'status',
				'published_at as publishedAt',
				'person.name as publishedBy',
				'protocol_version.version',
				'definition'
			])
			.where('study_id', '=', studyId)
			.orderBy('number', 'desc')
			.limit(1)
			.executeTakeFirst();
		if (!found) throw new Refusal('NOT_FOUND');
		return { ...found, definition: held(found.definition) };
	});
