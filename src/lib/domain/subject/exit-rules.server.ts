import { Refusal } from '$lib/refusal';
import type { Writer } from '$lib/server/change';
import { getDefinition } from '../study/study.reads.server';
import { unansweredAttempts } from './exit';
import type { ExitInput } from './subject.input';

/** Refuses what cannot follow what is recorded already. */
export async function mustFollow(
	writer: Writer,
	studyId: string,
	subject: { id: string; protocol_version_id: string },
	input: ExitInput
): Promise<void> {
	const earlier = await writer
		.selectFrom('study_exit')
		.select('kind')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subject.id)
		.where('taken_back_at', 'is', null)
		.execute();
	if (earlier.some((exit) => exit.kind === input.kind))
		throw new Refusal('CONFLICT', { what: `“${input.kind}” is recorded already.` });
	if (earlier.some((exit) => exit.kind === 'died' || exit.kind === 'completed'))
		throw new Refusal('LEFT_STUDY');
	if (input.kind === 'lost to follow-up') await mustHaveTried(writer, studyId, subject);
	if (input.kind === 'completed') await mustBeSettled(writer, studyId, subject.id);
}

async function mustHaveTried(
	writer: Writer,
	studyId: string,
	subject: { id: string; protocol_version_id: string }
): Promise<void> {
	const { lostAfterAttempts: needed = 1 } = await getDefinition(
		writer,
		studyId,
		subject.protocol_version_id
	);
	const attempts = await writer
		.selectFrom('contact_attempt')
		.select('outcome')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subject.id)
		.orderBy('at')
		.orderBy('id')
		.execute();
	const tried = unansweredAttempts(attempts.map((each) => each.outcome));
	if (tried < needed)
		throw new Refusal('RULE', {
			why: `Somebody is lost to follow-up after ${needed === 1 ? 'an attempt' : `${needed} attempts`} to reach them without an answer; ${tried === 0 ? 'none is' : `${tried} ${tried === 1 ? 'is' : 'are'}`} logged since they were last reached. Log each of them first.`
		});
}

async function mustBeSettled(writer: Writer, studyId: string, subjectId: string): Promise<void> {
	const open = await writer
		.selectFrom('visit')
		.select('name')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('status', 'in', ['planned', 'booked', 'under way'])
		.orderBy('position')
		.execute();
	if (open.length > 0)
		throw new Refusal('RULE', {
			why: `These visits are still open: ${open.map((visit) => visit.name).join(', ')}.`
		});
}
