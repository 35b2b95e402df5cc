import { newId } from '$lib/id';
import type { Actor } from '$lib/server/actor';
import type { Reader, Writer } from '$lib/server/change';
import { clock } from '$lib/time/clock';
import { isUnit } from '$lib/units/units';
import type { StudyDefinition } from '../study/definition';
import { definitionOf, holdVisit, type VisitRow } from '../visit/visit.reads.server';
import type { MeasuredNumber } from './compare';
import { deriveAll, type DeriveContext } from './derive';
import { formulaOf } from './formulas';
import {
	earlierValues,
	plannedMeasures,
	valuesAtVisit,
	type MeasurementRow,
	type PlannedMeasure
} from './measurement.reads.server';

/** Characteristics as the rules take them; a number comes with the unit the definition gives it. */
export function characteristicsFor(
	definition: Pick<StudyDefinition, 'characteristics'>,
	stored: unknown
): DeriveContext['characteristics'] {
	const values = (stored ?? {}) as Record<string, unknown>;
	return Object.fromEntries(
		definition.characteristics.map((each) => {
			const value = values[each.key];
			if (each.kind === 'number')
				return [each.key, typeof value === 'number' ? { value, unit: each.unit } : null];
			return [each.key, typeof value === 'string' ? value : null];
		})
	);
}

export async function characteristicsOf(
	reader: Reader,
	definition: Pick<StudyDefinition, 'characteristics'>,
	subjectId: string
): Promise<DeriveContext['characteristics']> {
	const row = await reader
		.selectFrom('subject')
		.select('characteristics')
		.where('id', '=', subjectId)
		.executeTakeFirstOrThrow();
	return characteristicsFor(definition, row.characteristics);
}

export function measuredNumber(row: MeasurementRow | undefined): MeasuredNumber | null {
	if (!row || row.value === null || !isUnit(row.unit)) return null;
	return { value: row.value, unit: row.unit };
}

const needsBaseline = ({ measure }: Pick<PlannedMeasure, 'measure'>): boolean =>
	measure.kind === 'derived' && Boolean(formulaOf(measure.derivedBy.formula).fromBaseline);

/** The subject’s values at the baseline visit for the changes that are worked out at this one. */
async function baselineFor(
	reader: Reader,
	visit: VisitRow,
	definition: StudyDefinition,
	derived: readonly PlannedMeasure[]
): Promise<DeriveContext['baseline']> {
	const changes = derived.filter(needsBaseline);
	if (changes.length === 0) return undefined;
	if (visit.key === definition.baselineVisit) return 'here';
	const keys = changes.flatMap(({ measure }) =>
		measure.kind === 'derived'
			? Object.values(measure.derivedBy.inputs).map((each) => each.slice(each.indexOf(':') + 1))
			: []
	);
	const earlier = await earlierValues(reader, visit, keys);
	return Object.fromEntries(
		earlier
			.filter((each) => each.visitKey === definition.baselineVisit)
			.map((each) => [
				each.measureKey,
				isUnit(each.unit) ? { value: each.value, unit: each.unit } : null
			])
	);
}

/** After a value at the baseline visit: what later visits derive as a change from it is worked out again. */
export async function deriveAfterBaseline(
	writer: Writer,
	actor: Actor,
	visit: VisitRow,
	definition: StudyDefinition
): Promise<void> {
	if (visit.key !== definition.baselineVisit) return;
	const later = await writer
		.selectFrom('visit')
		.select('id')
		.where('subject_id', '=', visit.subjectId)
		.where('position', '>', visit.position)
		.where('status', 'in', ['under way', 'completed'])
		.orderBy('position')
		.execute();
	for (const { id } of later) {
		const held = await holdVisit(writer, visit.studyId, id);
		if ((await plannedMeasures(writer, held)).some(needsBaseline))
			await deriveAtVisit(writer, actor, held, held.status === 'completed');
	}
}

/**
 * Works out each derived measure of the visit from what is kept, and keeps the result. Where nothing can be worked out, a
 * value that stood is taken back; when `settle` is given, the reason is kept so that nothing stays blank.
 */
export async function deriveAtVisit(
	writer: Writer,
	actor: Actor,
	visit: VisitRow,
	settle: boolean
): Promise<void> {
	const planned = await plannedMeasures(writer, visit);
	const derived = planned.filter((each) => each.measure.kind === 'derived');
	if (derived.length === 0 || visit.protocolVersionId === null || visit.happenedOn === null) return;
	const definition = await definitionOf(writer, visit.protocolVersionId);
	const rows = await valuesAtVisit(writer, visit.id);
	const baseline = await baselineFor(writer, visit, definition, derived);
	const results = deriveAll(
		definition,
		derived.map((each) => each.measure.key),
		{
			on: visit.happenedOn,
			measures: Object.fromEntries(
				planned
					.filter((each) => each.measure.kind !== 'derived')
					.map((each) => [each.measure.key, measuredNumber(rows.get(each.measureId))])
			),
			characteristics: await characteristicsOf(writer, definition, visit.subjectId),
			...(baseline === undefined ? {} : { baseline })
		}
	);
	for (const { measureId, measure } of derived) {
		const result = results.get(measure.key);
		if (!result || measure.kind !== 'derived') continue;
		const before = rows.get(measureId);
		const value = result.ok ? result.value.value : null;
		const reason = result.ok ? null : result.problem.message.slice(0, 200);
		if (!before) {
			if (value === null && !settle) continue;
			await writer
				.insertInto('measurement')
				.values({
					id: newId(),
					study_id: visit.studyId,
					site_id: visit.site.id,
					subject_id: visit.subjectId,
					visit_id: visit.id,
					measure_id: measureId,
					value,
					unit: measure.unit,
					not_done_reason: reason,
					taken_at: clock.now(),
					taken_by: actor.personId,
					source: 'derived'
				})
				.execute();
		} else if (before.value !== value || before.not_done_reason !== reason)
			await writer
				.updateTable('measurement')
				.set({
					value,
					not_done_reason: reason,
					taken_at: clock.now(),
					taken_by: actor.personId,
					entered_at: clock.now()
				})
				.where('id', '=', before.id)
				.execute();
	}
}
