import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, type Writer } from '$lib/server/change';
import { beginRun } from '$lib/server/jobs/run';
import {
	characteristicIn,
	sameModel,
	settledSpec,
	type LookInput,
	type LookSpec
} from './look.input';
import { lookChoices } from './choices.server';
import { planOf } from './plan.server';

async function nextNumber(writer: Writer, studyId: string): Promise<number> {
	await sql`select pg_advisory_xact_lock(hashtextextended(${`look:${studyId}`}, 0))`.execute(
		writer
	);
	const { most } = await writer
		.selectFrom('look')
		.select((eb) => eb.fn.max('number').as('most'))
		.where('study_id', '=', studyId)
		.executeTakeFirstOrThrow();
	return (most ?? 0) + 1;
}

/** Slots that name something this study does not have are said beside the slot. */
async function checkSlots(writer: Writer, studyId: string, cutId: string, spec: LookSpec) {
	const cut = await writer
		.selectFrom('cut')
		.select('id')
		.where('id', '=', cutId)
		.where('study_id', '=', studyId)
		.executeTakeFirst();
	const errors: Record<string, string> = {};
	if (!cut) errors.cutId = 'Choose a data cut of this study.';
	const { definition, randomised } = await lookChoices(writer, studyId);
	if (!definition.measures.some(({ key }) => key === spec.measure))
		errors.measure = 'Choose a measure with numbers.';
	const trait = (slot: string) => {
		const key = characteristicIn(slot);
		return definition.characteristics.find((each) => each.key === key);
	};
	if (spec.group === 'arms' && !randomised) errors.group = 'This study has no arms.';
	if (characteristicIn(spec.group) !== null && trait(spec.group)?.kind !== 'choice')
		errors.group = 'Choose a characteristic with choices.';
	if (spec.covariates.some((slot) => characteristicIn(slot) !== null && !trait(slot)))
		errors.covariates = 'Choose characteristics of this study.';
	if (spec.group !== 'none' && spec.covariates.some((slot) => slot === spec.group))
		errors.covariates = 'The groups are compared already; they cannot be adjusted for as well.';
	if (spec.method === 'ML' && spec.df === 'kenward-roger')
		errors.df = 'Kenward–Roger needs restricted likelihood. Choose another correction.';
	if (Object.keys(errors).length > 0) throw new Refusal('INVALID', {}, errors);
}

/**
 * Asks for a look. Pooled ones are the ordinary worker's; one by arm is handed to the closed area, and its open row says
 * that it was made and nothing of what it asks or finds.
 */
export async function requestLook(
	actor: Actor,
	studyId: string,
	{ cutId, ...given }: LookInput
): Promise<{ id: string; number: number; jobRunId: string }> {
	const spec = settledSpec(given);
	const byArm = spec.group === 'arms';
	return change(actor, byArm ? 'look.by-arm' : 'look.pooled', { studyId }, async (writer) => {
		await checkSlots(writer, studyId, cutId, spec);
		const id = newId();
		const number = await nextNumber(writer, studyId);
		const plan = byArm ? await planOf(writer, studyId) : null;
		const queue = byArm ? 'by-arm-look' : 'look';
		const jobRunId = await beginRun(writer, actor, { queue, title: `Look ${number}`, studyId });
		await writer
			.insertInto('look')
			.values({
				id,
				study_id: studyId,
				cut_id: cutId,
				number,
				kind: byArm ? 'by arm' : 'pooled',
				planned: plan !== null && sameModel(plan, spec),
				spec: byArm ? null : JSON.stringify(spec),
				job_run_id: jobRunId,
				requested_by: actor.personId
			})
			.execute();
		if (byArm)
			await sql`select closed.request_look(${id}::uuid, ${JSON.stringify(spec)}::jsonb)`.execute(
				writer
			);
		await writer.enqueue(queue, { lookId: id, jobRunId });
		return { id, number, jobRunId };
	});
}
