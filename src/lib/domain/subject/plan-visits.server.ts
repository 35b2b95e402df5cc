import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Writer } from '$lib/server/change';
import { plainDateOf, type PlainDate } from '$lib/time/dates';
import { planVisits } from '../schedule/window';
import { getDefinition } from '../study/study.reads.server';
import { endsVisits } from './exit';

const day = (date: string | null): PlainDate | null => (date === null ? null : plainDateOf(date));

/**
 * Brings a subject's visits in line with what is known of the anchors: makes those whose window can be counted now, and
 * moves the windows of visits still to come where their anchor has moved. Run after enrolling, after randomising and
 * after a visit that others are counted from; running it again changes nothing.
 */
export async function planSubjectVisits(
	writer: Writer,
	studyId: string,
	subjectId: string
): Promise<void> {
	const subject = await writer
		.selectFrom('subject')
		.select([
			'id',
			'site_id',
			'protocol_version_id',
			'enrolled_on',
			'randomised_on',
			'version_since'
		])
		.where('study_id', '=', studyId)
		.where('id', '=', subjectId)
		.executeTakeFirst();
	if (!subject) throw new Refusal('NOT_FOUND');
	const definition = await getDefinition(writer, studyId, subject.protocol_version_id);
	const rows = await writer
		.selectFrom('planned_visit')
		.select(['id', 'key', 'name', 'position'])
		.where('study_id', '=', studyId)
		.where('protocol_version_id', '=', subject.protocol_version_id)
		.execute();
	const existing = await writer
		.selectFrom('visit as v')
		.leftJoin('planned_visit as p', 'p.id', 'v.planned_visit_id')
		.select([
			'v.id',
			'p.key',
			'p.protocol_version_id',
			'p.position as planned_position',
			'v.position',
			'v.status',
			'v.earliest',
			'v.target',
			'v.latest',
			'v.happened_on'
		])
		.where('v.study_id', '=', studyId)
		.where('v.subject_id', '=', subjectId)
		.orderBy('v.position')
		.execute();
	const exits = await writer
		.selectFrom('study_exit')
		.select('kind')
		.where('study_id', '=', studyId)
		.where('subject_id', '=', subjectId)
		.where('taken_back_at', 'is', null)
		.execute();
	// A key is the same visit in every version.
	const byPlan = new Map(existing.map((visit) => [visit.key, visit]));
	const own = existing.find((visit) => visit.protocol_version_id === subject.protocol_version_id);
	// Whoever follows another version than the first has visits counted on from what was there before.
	const ahead =
		subject.version_since === null
			? 0
			: own && own.planned_position !== null
				? own.position - own.planned_position
				: (existing.at(-1)?.position ?? 0);
	const byKey = new Map(rows.map((row) => [row.key, row]));
	const took = Object.fromEntries(
		rows.map((row) => [row.key, day(byPlan.get(row.key)?.happened_on ?? null)])
	);
	const left = exits.some((exit) => endsVisits(exit.kind));
	const fresh = [];
	for (const { visit, window } of planVisits(definition, {
		enrolment: plainDateOf(subject.enrolled_on),
		randomisation: day(subject.randomised_on),
		visits: took
	})) {
		const row = byKey.get(visit.key);
		if (!row || !window) continue;
		const there = byPlan.get(row.key);
		if (!there) {
			// What closed before the subject came to this version was never asked of it.
			const asked = subject.version_since === null || window.latest >= subject.version_since;
			if (!left && asked)
				fresh.push({
					id: newId(),
					study_id: studyId,
					site_id: subject.site_id,
					subject_id: subject.id,
					planned_visit_id: row.id,
					name: row.name,
					position: row.position + ahead,
					...window
				});
			continue;
		}
		const moved =
			there.earliest !== window.earliest ||
			there.target !== window.target ||
			there.latest !== window.latest;
		// A visit of an earlier version was over when the subject came to this one.
		if (there.protocol_version_id !== subject.protocol_version_id) continue;
		if (moved && (there.status === 'planned' || there.status === 'booked'))
			await writer.updateTable('visit').set(window).where('id', '=', there.id).execute();
	}
	if (fresh.length > 0) await writer.insertInto('visit').values(fresh).execute();
}
