import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { plainDateOf, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import { getDefinition } from '../study/study.reads.server';
import { closeOpenAppointment } from '../visit/booking.commands.server';
import { windowOfRow } from '../visit/visit.reads.server';
import { replan, type StandingVisit } from './replan';

const day = (date: string | null): PlainDate | null => (date === null ? null : plainDateOf(date));

export interface Followed {
	moved: number;
	made: number;
	dropped: number;
}

/**
 * Lets a subject follow another version from today on: visits still to come are planned by it, everything else stays
 * as it was made. A booking outside its moved window is kept; the lists say that it is to be moved.
 */
export async function followVersion(
	writer: Writer,
	studyId: string,
	subjectId: string,
	protocolVersionId: string
): Promise<Followed> {
	const subject = await writer
		.selectFrom('subject as s')
		.innerJoin('site as t', 't.id', 's.site_id')
		.select([
			's.id',
			's.site_id',
			's.protocol_version_id',
			's.enrolled_on',
			's.randomised_on',
			't.zone'
		])
		.where('s.study_id', '=', studyId)
		.where('s.id', '=', subjectId)
		.forUpdate('s')
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	if (subject.protocol_version_id === protocolVersionId) return { moved: 0, made: 0, dropped: 0 };
	const today = dateInZone(clock.now(), subject.zone);
	const definition = await getDefinition(writer, studyId, protocolVersionId);
	const planned = new Map(
		(
			await writer
				.selectFrom('planned_visit')
				.select(['id', 'key', 'name'])
				.where('study_id', '=', studyId)
				.where('protocol_version_id', '=', protocolVersionId)
				.execute()
		).map((row) => [row.key, row])
	);
	const rows = await writer
		.selectFrom('visit as v')
		.leftJoin('planned_visit as p', 'p.id', 'v.planned_visit_id')
		.select([
			'v.id',
			'p.key',
			'v.status',
			'v.position',
			'v.earliest',
			'v.target',
			'v.latest',
			'v.happened_on',
			'v.dropped_by'
		])
		.where('v.study_id', '=', studyId)
		.where('v.subject_id', '=', subjectId)
		.orderBy('v.id')
		.forUpdate('v')
		.execute();
	const standing: StandingVisit[] = rows.map((row) => ({
		id: row.id,
		key: row.key,
		status: row.status,
		position: row.position,
		window: windowOfRow(row),
		dropped: row.dropped_by !== null
	}));
	const took = Object.fromEntries(
		rows.flatMap((row) => (row.key ? [[row.key, day(row.happened_on)]] : []))
	);
	await writer
		.updateTable('subject')
		.set({ protocol_version_id: protocolVersionId, version_since: today })
		.where('id', '=', subjectId)
		.execute();
	const done: Followed = { moved: 0, made: 0, dropped: 0 };
	for (const step of replan(
		definition,
		standing,
		{
			enrolment: plainDateOf(subject.enrolled_on),
			randomisation: day(subject.randomised_on),
			visits: took
		},
		today
	)) {
		if (step.what === 'drop') {
			await closeOpenAppointment(writer, step.id);
			await writer
				.updateTable('visit')
				.set({ status: 'not required', dropped_by: protocolVersionId })
				.where('id', '=', step.id)
				.execute();
			done.dropped += 1;
			continue;
		}
		const row = planned.get(step.key);
		if (!row) throw new Error(`Version ${protocolVersionId} has no visit ${step.key}.`);
		if (step.what === 'make') {
			await writer
				.insertInto('visit')
				.values({
					id: newId(),
					study_id: studyId,
					site_id: subject.site_id,
					subject_id: subjectId,
					planned_visit_id: row.id,
					name: row.name,
					position: step.position,
					...step.window
				})
				.execute();
			done.made += 1;
			continue;
		}
		await writer
			.updateTable('visit')
			.set({
				planned_visit_id: row.id,
				name: row.name,
				position: step.position,
				...(step.window ?? {}),
				...(step.revive ? { status: 'planned' as const, dropped_by: null } : {})
			})
			.where('id', '=', step.id)
			.execute();
		done.moved += 1;
	}
	return done;
}
