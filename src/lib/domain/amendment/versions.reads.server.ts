import { Refusal } from '$lib/refusal';
import type { Reader } from '$lib/server/change';
import { plainDateOf, type PlainDate } from '$lib/time/dates';
import type { StudyDefinition } from '../study/definition';
import { readDefinition } from '../study/template';
import type { VersionFacts } from './amendment';

export interface PublishedVersion extends VersionFacts {
	id: string;
	definition: StudyDefinition;
	summary: string | null;
	approvedOn: PlainDate | null;
	reconsentBy: PlainDate | null;
	publishedAt: Date;
}

/** Within a read or a change: the published versions of a study, the oldest first. */
export async function publishedVersions(
	reader: Reader,
	studyId: string
): Promise<PublishedVersion[]> {
	const rows = await reader
		.selectFrom('protocol_version')
		.select([
			'id',
			'number',
			'definition',
			'summary',
			'approved_on',
			'reconsent',
			'reconsent_by',
			'published_at'
		])
		.where('study_id', '=', studyId)
		.where('status', '=', 'published')
		.orderBy('number')
		.execute();
	return rows.map((row) => {
		const read = readDefinition(row.definition);
		if (!read.ok) throw new Error('A stored study definition does not hold.');
		return {
			id: row.id,
			number: row.number,
			definition: read.definition,
			forms: read.definition.consentVersions,
			summary: row.summary,
			approvedOn: row.approved_on === null ? null : plainDateOf(row.approved_on),
			reconsent: row.reconsent ?? false,
			reconsentBy: row.reconsent_by === null ? null : plainDateOf(row.reconsent_by),
			publishedAt: row.published_at as Date
		};
	});
}

/** The newest of them; refused where there is none. */
export function newestOf(versions: readonly PublishedVersion[]): PublishedVersion {
	const newest = versions.at(-1);
	if (!newest) throw new Refusal('NOT_PUBLISHED');
	return newest;
}

/** Where a version asks everybody again without a new form, the day from which the old form says yes to it. */
export function consentNotBefore(
	versions: readonly PublishedVersion[],
	number: number
): PlainDate | null {
	const asking = versions.filter((version) => version.number <= number && version.reconsent).at(-1);
	return asking?.approvedOn ?? null;
}
