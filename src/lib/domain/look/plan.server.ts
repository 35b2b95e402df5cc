import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, read, type Reader } from '$lib/server/change';
import { lookSpec, settledSpec, type LookSpec } from './look.input';
import { lookChoices } from './choices.server';
import { wordsOf } from './words';

export interface SignedPlan {
	spec: LookSpec;
	words: string;
	signedBy: string;
	signedAt: string;
}

/** The model of the plan, or null while there is none. */
export async function planOf(reader: Reader, studyId: string): Promise<LookSpec | null> {
	const plan = await reader
		.selectFrom('monitoring_plan')
		.select('spec')
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	return plan ? lookSpec.parse(plan.spec) : null;
}

export const findPlan = (actor: Actor, studyId: string): Promise<SignedPlan | null> =>
	read(actor, 'look.read', { studyId }, async (reader) => {
		const row = await reader
			.selectFrom('monitoring_plan')
			.innerJoin('person', 'person.id', 'monitoring_plan.signed_by')
			.select(['monitoring_plan.spec', 'monitoring_plan.signed_at', 'person.name'])
			.where('study_id', '=', studyId)
			.executeTakeFirst();
		if (!row) return null;
		const spec = lookSpec.parse(row.spec);
		const { definition } = await lookChoices(reader, studyId);
		return {
			spec,
			words: wordsOf(spec, definition).model,
			signedBy: row.name,
			signedAt: row.signed_at.toISOString()
		};
	});

/** Signs the plan, once: which model counts as planned does not change after anybody has looked. */
export const signPlan = (actor: Actor, studyId: string, input: LookSpec): Promise<void> =>
	change(actor, 'plan.sign', { studyId }, async (writer) => {
		if (await planOf(writer, studyId)) throw new Refusal('PLAN_EXISTS');
		const { definition, randomised } = await lookChoices(writer, studyId);
		if (!definition.measures.some(({ key }) => key === input.measure))
			throw new Refusal('INVALID', {}, { measure: 'Choose a measure of this study.' });
		if (input.group === 'arms' && !randomised)
			throw new Refusal('INVALID', {}, { group: 'This study has no arms.' });
		await writer
			.insertInto('monitoring_plan')
			.values({
				id: newId(),
				study_id: studyId,
				spec: JSON.stringify(settledSpec(input)),
				signed_by: actor.personId
			})
			.execute();
	});
