import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged } from '$lib/server/change';
import { getDefinition } from '../study/study.reads.server';
import { stratumOf } from '../subject/particulars';
import { siteOf } from '../subject/site.reads.server';
import type { CorrectStratumInput } from './allocation.input';

/**
 * Corrects the levels a subject was entered with, as data. An allocation that was made stays as it is, and a deviation says
 * that it was made within other levels: the analysis reads the corrected ones.
 */
export async function correctStratum(
	actor: Actor,
	studyId: string,
	subjectId: string,
	{ stratum: given, reason }: CorrectStratumInput,
	version: number
): Promise<{ version: number; afterAllocation: boolean }> {
	const siteId = await siteOf(actor, 'subject.correct', 'subject', studyId, subjectId);
	return change(
		actor,
		'subject.correct',
		{ studyId, siteId },
		async (writer) => {
			const subject = await writer
				.selectFrom('subject')
				.select(['version', 'stratum', 'protocol_version_id', 'randomised_at'])
				.where('study_id', '=', studyId)
				.where('id', '=', subjectId)
				.forUpdate()
				.executeTakeFirst();
			if (!subject) throw new Refusal('NOT_FOUND');
			if (subject.version !== version) throw new Refusal('STALE');
			const definition = await getDefinition(writer, studyId, subject.protocol_version_id);
			const before = subject.stratum as Record<string, string>;
			const { stratum, errors } = stratumOf(definition, given, before.site ?? '');
			if (Object.keys(errors).length > 0) throw new Refusal('INVALID', {}, errors);
			const changed = definition.strata.filter(({ key }) => stratum[key] !== before[key]);
			if (changed.length === 0)
				throw new Refusal('RULE', {
					why: 'These are the levels on record: there is nothing to correct.'
				});
			const rows = await writer
				.updateTable('subject')
				.set({ stratum: JSON.stringify({ ...before, ...stratum }) })
				.where('id', '=', subjectId)
				.where('version', '=', version)
				.returning('version')
				.execute();
			mustHaveChanged(rows);
			const afterAllocation = subject.randomised_at !== null;
			if (afterAllocation)
				await writer
					.insertInto('deviation')
					.values({
						id: newId(),
						study_id: studyId,
						site_id: siteId,
						subject_id: subjectId,
						category: 'other',
						important: false,
						detail: `Randomised within a wrong stratum (${changed.map(({ name }) => name).join(', ')}). Corrected as data; the allocation stays.`
					})
					.execute();
			return { version: rows[0]?.version ?? version + 1, afterAllocation };
		},
		{ reason }
	);
}
