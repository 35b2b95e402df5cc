import type { Writer } from '$lib/server/change';
import { findPlainDate, type PlainDate } from '$lib/time/dates';
import { planVisits } from '../schedule/window';
import type { StudyDefinition } from '../study/definition';
import type { VisitRow } from './visit.reads.server';

/**
 * Windows counted from a visit follow the day it really took place. Only visits still to come move; each move stands in
 * the audit trail.
 */
export async function moveDependentWindows(
	writer: Writer,
	visit: VisitRow,
	definition: StudyDefinition
): Promise<void> {
	if (!definition.visits.some((each) => each.anchor.startsWith('visit:'))) return;
	const subject = await writer
		.selectFrom('subject')
		.select(['enrolled_on', 'randomised_on'])
		.where('id', '=', visit.subjectId)
		.executeTakeFirstOrThrow();
	const rows = await writer
		.selectFrom('visit as v')
		.innerJoin('planned_visit as pv', 'pv.id', 'v.planned_visit_id')
		.select(['v.id', 'v.status', 'v.happened_on', 'v.earliest', 'v.target', 'v.latest', 'pv.key'])
		.where('v.subject_id', '=', visit.subjectId)
		.execute();
	const visits: Record<string, PlainDate | null> = {};
	for (const row of rows)
		if (row.happened_on !== null) visits[row.key] = findPlainDate(row.happened_on);
	const planned = planVisits(definition, {
		enrolment: findPlainDate(subject.enrolled_on),
		randomisation: subject.randomised_on === null ? null : findPlainDate(subject.randomised_on),
		visits
	});
	for (const { visit: plan, window } of planned) {
		const row = rows.find((each) => each.key === plan.key);
		if (!row || !window || !plan.anchor.startsWith('visit:')) continue;
		if (row.status !== 'planned' && row.status !== 'booked') continue;
		if (row.earliest === window.earliest && row.latest === window.latest) continue;
		await writer
			.updateTable('visit')
			.set({ earliest: window.earliest, target: window.target, latest: window.latest })
			.where('id', '=', row.id)
			.execute();
	}
}
