import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { shortDateText, type PlainDate } from '$lib/time/dates';
import { dateInZone } from '$lib/time/zones';
import { deriveAtVisit } from '../measurement/derived.server';
import { plannedMeasures, valuesAtVisit } from '../measurement/measurement.reads.server';
import { placementOf, windowText } from '../schedule/window';
import { planSubjectVisits } from '../subject/plan-visits.server';
import { closeAppointment, findOpenAppointment } from './booking.commands.server';
import { refuseStale, refuseStep } from './steps.server';
import {
	collectionEnded,
	holdVisit,
	refuseIfLeft,
	refuseWithoutConsent,
	scopeOfVisit,
	type VisitRow
} from './visit.reads.server';

/** Begins a visit today, where it takes place. `version` is the visit's. */
export async function startVisit(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number
): Promise<{ version: number; happenedOn: PlainDate }> {
	const scope = await scopeOfVisit(actor, 'visit.measure', studyId, visitId);
	return change(actor, 'visit.measure', scope, async (writer) => {
		const visit = await holdVisit(writer, studyId, visitId);
		refuseStep(visit, 'under way');
		refuseStale(visit, version);
		if (visit.window === null)
			throw new Refusal('RULE', {
				why: 'This visit has no window yet: the day it is counted from is not known.'
			});
		await refuseIfLeft(writer, visit.subjectId);
		await refuseWithoutConsent(writer, visit.subjectId, clock.now());
		// An appointment on another day is not the one being kept.
		const open = await findOpenAppointment(writer, visitId);
		if (open && dateInZone(open.starts_at, visit.site.zone) !== visit.today)
			await closeAppointment(writer, open);
		const changed = await writer
			.updateTable('visit')
			.set({ status: 'under way', happened_on: visit.today })
			.where('id', '=', visitId)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		return { version: changed[0]?.version ?? version + 1, happenedOn: visit.today };
	});
}

/**
 * Ends a visit: each planned measure has a value or a reason; what is worked out is worked out again; outside the window
 * it leaves one deviation. `version` is the visit's.
 */
export async function finishVisit(
	actor: Actor,
	studyId: string,
	visitId: string,
	version: number
): Promise<{ version: number; deviation: 'early visit' | 'late visit' | null }> {
	const scope = await scopeOfVisit(actor, 'visit.measure', studyId, visitId);
	return change(actor, 'visit.measure', scope, async (writer) => {
		const visit = await holdVisit(writer, studyId, visitId);
		refuseStep(visit, 'completed');
		refuseStale(visit, version);
		if (visit.happenedOn === null) throw new Refusal('VISIT_STATE', { status: visit.status });
		// Where nothing more may be written down, the visit ends as it stands.
		if (!(await collectionEnded(writer, visit.subjectId))) await refuseIncomplete(writer, visit);
		await deriveAtVisit(writer, actor, visit, true);
		const open = await findOpenAppointment(writer, visitId);
		if (open)
			await writer
				.updateTable('appointment')
				.set({ status: 'kept' })
				.where('id', '=', open.id)
				.execute();
		const changed = await writer
			.updateTable('visit')
			.set({ status: 'completed', finished_at: clock.now(), finished_by: actor.personId })
			.where('id', '=', visitId)
			.where('version', '=', version)
			.returning('version')
			.execute();
		mustHaveChanged(changed);
		const deviation = await noteOutsideWindow(
			writer,
			visit,
			visit.happenedOn,
			open?.outside_reason ?? null
		);
		// Windows counted from this visit follow the day it took place.
		if (visit.key !== null) await planSubjectVisits(writer, studyId, visit.subjectId);
		return { version: changed[0]?.version ?? version + 1, deviation };
	});
}

async function refuseIncomplete(writer: Writer, visit: VisitRow): Promise<void> {
	const planned = await plannedMeasures(writer, visit);
	const values = await valuesAtVisit(writer, visit.id);
	const open = planned.filter(
		(each) => each.measure.kind !== 'derived' && !values.has(each.measureId)
	);
	if (open.length === 0) return;
	const sentence = 'Enter a value, or say why it was not done.';
	throw new Refusal(
		'INCOMPLETE',
		{ which: open.map((each) => each.measure.name).join(', ') },
		Object.fromEntries(open.map((each) => [each.measureId, sentence]))
	);
}

/** One deviation for a visit outside its window, however often it is finished. */
async function noteOutsideWindow(
	writer: Writer,
	visit: VisitRow,
	happenedOn: PlainDate,
	bookedBecause: string | null
): Promise<'early visit' | 'late visit' | null> {
	if (visit.window === null) return null;
	const { place, days } = placementOf(visit.window, happenedOn);
	if (place === 'in-window') return null;
	const category = place === 'early' ? 'early visit' : 'late visit';
	const side = place === 'early' ? 'before it opened' : 'after it closed';
	const detail =
		`${visit.name} took place on ${shortDateText(happenedOn)}, ${days} day${days === 1 ? '' : 's'} ${side} ` +
		`(window ${windowText(visit.window)}).` +
		(bookedBecause ? ` Said when it was booked: ${bookedBecause}` : '');
	await addDeviation(writer, visit, category, detail);
	return category;
}

export async function addDeviation(
	writer: Writer,
	visit: VisitRow,
	category: 'early visit' | 'late visit' | 'missed visit',
	detail: string
): Promise<void> {
	await writer
		.insertInto('deviation')
		.values({
			id: newId(),
			study_id: visit.studyId,
			site_id: visit.site.id,
			subject_id: visit.subjectId,
			visit_id: visit.id,
			category,
			detail: detail.slice(0, 1000)
		})
		.onConflict((conflict) =>
			conflict
				.columns(['visit_id', 'category'])
				.where('category', 'in', ['early visit', 'late visit', 'missed visit'])
				.doNothing()
		)
		.execute();
}
