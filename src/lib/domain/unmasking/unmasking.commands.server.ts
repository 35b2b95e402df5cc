import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { beginSigning, proveSigner } from '$lib/server/auth/signing';
import { countTry } from '$lib/server/auth/throttle';
import { change, read, type Reader } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { plainDateOf } from '$lib/time/dates';
import { instantFromLocal } from '$lib/time/zones';
import type { StudyDefinition } from '../study/definition';
import { getDefinition } from '../study/study.reads.server';
import { getSite, siteOf } from '../subject/site.reads.server';
import { readCode } from './code';
import { hashOfCode } from './code.server';
import { tellUnmasked } from './notice.server';
import type { OutsideInput, UnmaskInput } from './unmasking.input';

async function subjectOf(reader: Reader, studyId: string, subjectId: string) {
	const subject = await reader
		.selectFrom('subject as s')
		.innerJoin('study as t', 't.id', 's.study_id')
		.select(['s.number', 's.kit_number', 's.protocol_version_id', 't.masked'])
		.where('s.study_id', '=', studyId)
		.where('s.id', '=', subjectId)
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	if (!subject.masked || subject.kit_number === null) throw new Refusal('NOTHING_MASKED');
	return { ...subject, kit: subject.kit_number };
}

/** A reason stays in the record that masked people read: an arm's name has no place in it. */
function refuseArmNames(definition: StudyDefinition, words: Record<string, string>): void {
	for (const [field, text] of Object.entries(words))
		for (const { name } of definition.arms)
			if (text.toLowerCase().includes(name.toLowerCase()))
				throw new Refusal(
					'INVALID',
					{},
					{ [field]: 'Leave the arm out: people who must not know it read this.' }
				);
}

/**
 * Shows one subject's arm to the investigator of its site who asks: after proving who it is and saying why. The arm is in
 * the answer and nowhere else in the open part; named people are told that it happened.
 */
export async function unmaskSubject(
	actor: Actor,
	studyId: string,
	subjectId: string,
	{ reason, ...secrets }: UnmaskInput
): Promise<{ arm: string; subject: string; unmaskingId: string }> {
	const siteId = await siteOf(actor, 'subject.unmask', 'subject', studyId, subjectId);
	const scope = { studyId, siteId };
	// Whoever may not is turned away, and whatever cannot be shown is said, before a password is asked for.
	const { definition, number } = await read(actor, 'subject.unmask', scope, async (reader) => {
		const subject = await subjectOf(reader, studyId, subjectId);
		return {
			...subject,
			definition: await getDefinition(reader, studyId, subject.protocol_version_id)
		};
	});
	refuseArmNames(definition, { reason });
	await countTry('unmask', actor.personId);
	try {
		await proveSigner(actor, scope, { email: secrets.email, password: secrets.password });
	} catch (refused) {
		if (refused instanceof Refusal && refused.code === 'SIGNING_SECRET')
			throw new Refusal('UNMASK_SECRET', {}, refused.fields);
		throw refused;
	}
	return change(
		actor,
		'subject.unmask',
		scope,
		async (writer) => {
			const unmaskingId = newId();
			const { rows } = await sql<{ arm: string }>`
				select closed.unmask(${unmaskingId}::uuid, ${subjectId}::uuid, ${reason.trim()}) as arm`.execute(
				writer
			);
			const key = rows[0]?.arm;
			await beginSigning(writer, actor);
			await tellUnmasked(writer, studyId, siteId);
			return {
				arm: definition.arms.find((each) => each.key === key)?.name ?? String(key),
				subject: number,
				unmaskingId
			};
		},
		{ reason: reason.trim() }
	);
}

/**
 * Writes down that an arm became known outside Heddle: by a sealed code that was opened while Heddle could not be reached,
 * or by accident. A code is taken once, and only from who has read it; both times are kept.
 */
export async function recordUnmasking(
	actor: Actor,
	studyId: string,
	subjectId: string,
	input: OutsideInput
): Promise<{ unmaskingId: string }> {
	const siteId = await siteOf(actor, 'unmasking.record', 'subject', studyId, subjectId);
	const scope = { studyId, siteId };
	const code = readCode(input.code);
	if (input.kind === 'sealed code' && code === null)
		throw new Refusal(
			'INVALID',
			{},
			{ code: 'Enter the ten letters and digits from inside the sheet.' }
		);
	if (input.kind === 'sealed code') await countTry('code', actor.personId);
	return change(
		actor,
		'unmasking.record',
		scope,
		async (writer) => {
			const subject = await subjectOf(writer, studyId, subjectId);
			const site = await getSite(writer, studyId, siteId);
			refuseArmNames(await getDefinition(writer, studyId, subject.protocol_version_id), {
				reason: input.reason,
				impact: input.impact
			});
			const happened = instantFromLocal(
				plainDateOf(input.happenedOn),
				input.happenedTime,
				site.zone
			);
			if (happened > clock.now())
				throw new Refusal(
					'FUTURE',
					{ what: 'The unmasking' },
					{ happenedOn: 'It is written down once it happened.' }
				);
			const unmaskingId = newId();
			if (input.kind === 'sealed code')
				await sql`select closed.use_code(${unmaskingId}::uuid, ${subjectId}::uuid, ${hashOfCode(studyId, subject.kit, code as string)},
					${happened.toISOString()}::timestamptz, ${input.knownTo}, ${input.reason}, ${input.impact === '' ? null : input.impact})`.execute(
					writer
				);
			else
				await writer
					.insertInto('unmasking')
					.values({
						id: unmaskingId,
						study_id: studyId,
						site_id: siteId,
						subject_id: subjectId,
						kind: 'accidental',
						person_id: actor.personId,
						known_to: input.knownTo,
						happened_at: happened,
						reason: input.reason,
						impact: input.impact === '' ? null : input.impact
					})
					.execute();
			await tellUnmasked(writer, studyId, siteId);
			return { unmaskingId };
		},
		{ reason: input.reason }
	);
}
