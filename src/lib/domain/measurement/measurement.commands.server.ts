import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import { change, mustHaveChanged, type Writer } from '$lib/server/change';
import type { Problem } from '../problems';
import type { StudyDefinition } from '../study/definition';
import { momentOf } from '../visit/chase.commands.server';
import {
	definitionOf,
	holdVisit,
	refuseWithoutConsent,
	scopeOfVisit,
	type VisitRow
} from '../visit/visit.reads.server';
import { clock } from '$lib/time/clock';
import { assess, type Assessed } from './assess';
import { checkComparisons, type ComparisonProblem, type MeasuredNumber } from './compare';
import { readDecimal } from './decimal';
import { deriveAfterBaseline, deriveAtVisit, measuredNumber } from './derived.server';
import type { RecordMeasurementInput } from './measurement.input';
import {
	earlierValues,
	lastAndBaseline,
	mayEnter,
	plannedMeasures,
	valuesAtVisit,
	type MeasurementRow,
	type PlannedMeasure
} from './measurement.reads.server';

/**
 * Keeps what was measured, in one way for the tablet, the API and whoever else calls. `version` is the saved value's, or
 * null for a first entry. What is derived from it is worked out again in the same transaction.
 */
export async function recordMeasurement(
	actor: Actor,
	studyId: string,
	visitId: string,
	measureId: string,
	version: number | null,
	input: RecordMeasurementInput
): Promise<{ id: string; version: number }> {
	const scope = await scopeOfVisit(actor, 'visit.record', studyId, visitId);
	return change(
		actor,
		'visit.record',
		scope,
		async (writer) => {
			const visit = await holdVisit(writer, studyId, visitId);
			// A visit that is over can still be put right, each time with a reason.
			if (visit.status !== 'under way' && visit.status !== 'completed')
				throw new Refusal('VISIT_STATE', { status: visit.status });
			if (visit.protocolVersionId === null) throw new Refusal('NOT_FOUND');
			await refuseWithoutConsent(writer, visit.subjectId, clock.now());
			const planned = await plannedMeasures(writer, visit);
			const asked = planned.find((each) => each.measureId === measureId);
			if (!asked) throw new Refusal('NOT_FOUND');
			if (!mayEnter(actor, scope, asked)) throw new Refusal('NOT_PERMITTED');
			const definition = await definitionOf(writer, visit.protocolVersionId);
			const rows = await valuesAtVisit(writer, visitId);
			const before = rows.get(measureId);
			const { value, softAnswer } = await judge(writer, visit, asked, definition, input, {
				planned,
				rows
			});
			const columns = {
				...columnsOf(value),
				soft_answer: softAnswer,
				comment: input.comment || null,
				taken_at: momentOf(input.takenAt, 'takenAt'),
				taken_by: actor.personId
			};
			if (before && version === null) {
				// Sent again because the answer was lost on the way: what is kept is what was meant.
				if (same(before, columns)) return { id: before.id, version: before.version };
				throw new Refusal('VERSION_NEEDED');
			}
			if (!before && version !== null) throw new Refusal('STALE');
			// What only one role enters need not have been there when the others ended the visit.
			const late = asked.openTo !== null && !before;
			if (visit.status === 'completed' && !late && input.reason === '')
				throw new Refusal('REASON_NEEDED', {}, { reason: new Refusal('REASON_NEEDED').message });
			const kept = before
				? await alter(writer, before, version as number, columns)
				: await add(writer, visit, asked, columns);
			await deriveAtVisit(writer, actor, visit, visit.status === 'completed');
			await deriveAfterBaseline(writer, actor, visit, definition);
			return kept;
		},
		{ reason: input.reason }
	);
}

const refusedBy = (problem: Problem) => {
	const code = problem.code === 'HARD_LIMIT' ? 'HARD_LIMIT' : 'RULE';
	return new Refusal(code, { why: problem.message }, { entry: problem.message });
};

/** What will be kept, once the rules agree, those across measures too; an unusual value needs the person's answer. */
async function judge(
	writer: Writer,
	visit: VisitRow,
	asked: PlannedMeasure,
	definition: StudyDefinition,
	input: RecordMeasurementInput,
	others: { planned: readonly PlannedMeasure[]; rows: ReadonlyMap<string, MeasurementRow> }
): Promise<{ value: Assessed; softAnswer: string | null }> {
	const { measure } = asked;
	const earlier = await earlierValues(writer, visit, [measure.key]);
	const verdict = assess(measure, input.entry, {
		today: visit.today,
		...lastAndBaseline(measure, earlier, definition.baselineVisit)
	});
	if (verdict.result === 'refused') throw refusedBy(verdict.problem);
	const broken = againstOthers(definition, others, asked, verdict.value);
	const wrong = broken.find(({ weight }) => weight === 'hard');
	if (wrong) throw refusedBy(wrong.problem);
	const unusual = [
		...(verdict.result === 'ask' ? verdict.problems : []),
		...broken.map(({ problem }) => problem)
	];
	if (unusual.length === 0) return { value: verdict.value, softAnswer: null };
	if (input.softAnswer === '') {
		const why = unusual.map((each) => each.message).join(' ');
		throw new Refusal('SOFT_LIMIT', { why }, { softAnswer: why });
	}
	return { value: verdict.value, softAnswer: input.softAnswer };
}

/** Rules across measures that this value would break with the others of the visit. */
function againstOthers(
	definition: StudyDefinition,
	{ planned, rows }: Parameters<typeof judge>[5],
	asked: PlannedMeasure,
	value: Assessed
): ComparisonProblem[] {
	const values: Record<string, MeasuredNumber | null> = Object.fromEntries(
		planned.map((each) => [each.measure.key, measuredNumber(rows.get(each.measureId))])
	);
	values[asked.measure.key] =
		value.kind === 'number' || value.kind === 'repeated'
			? { value: value.value, unit: value.unit }
			: null;
	return checkComparisons(definition, values).filter((each) =>
		each.measures.includes(asked.measure.key)
	);
}

interface Kept {
	value: number | null;
	text_value: string | null;
	readings: number[] | null;
	unit: string;
	entered_value: number | null;
	entered_unit: string | null;
	entered_readings: number[] | null;
	not_done_reason: string | null;
}

const nothing: Kept = {
	value: null,
	text_value: null,
	readings: null,
	unit: '1',
	entered_value: null,
	entered_unit: null,
	entered_readings: null,
	not_done_reason: null
};

/** Numbers are kept in the measure's unit, with what was typed and its unit beside them. */
function columnsOf(value: Assessed): Kept {
	const typed = (text: string) => readDecimal(text)?.value ?? Number(text);
	switch (value.kind) {
		case 'number':
			return {
				...nothing,
				value: value.value,
				unit: value.unit,
				entered_value: typed(value.entered.texts[0] ?? ''),
				entered_unit: value.entered.unit
			};
		case 'repeated':
			return {
				...nothing,
				value: value.value,
				readings: value.readings,
				unit: value.unit,
				entered_readings: value.entered.texts.map(typed),
				entered_unit: value.entered.unit
			};
		case 'not done':
			return { ...nothing, not_done_reason: value.reason };
		default:
			return { ...nothing, text_value: value.value };
	}
}

type Columns = Kept & {
	soft_answer: string | null;
	comment: string | null;
	taken_at: Date;
	taken_by: string;
};

const said = (row: Kept & { comment: string | null }) =>
	JSON.stringify([
		row.value,
		row.text_value,
		row.readings,
		row.entered_value,
		row.entered_unit,
		row.entered_readings,
		row.not_done_reason,
		row.comment
	]);
const same = (before: MeasurementRow, columns: Columns) => said(before) === said(columns);

async function add(
	writer: Writer,
	visit: VisitRow,
	asked: PlannedMeasure,
	columns: Columns
): Promise<{ id: string; version: number }> {
	return writer
		.insertInto('measurement')
		.values({
			id: newId(),
			study_id: visit.studyId,
			site_id: visit.site.id,
			subject_id: visit.subjectId,
			visit_id: visit.id,
			measure_id: asked.measureId,
			...columns,
			source: 'form'
		})
		.returning(['id', 'version'])
		.executeTakeFirstOrThrow();
}

async function alter(
	writer: Writer,
	before: MeasurementRow,
	version: number,
	columns: Columns
): Promise<{ id: string; version: number }> {
	const changed = await writer
		.updateTable('measurement')
		.set({ ...columns, source: 'form', entered_at: clock.now() })
		.where('id', '=', before.id)
		.where('version', '=', version)
		.returning(['id', 'version'])
		.execute();
	mustHaveChanged(changed);
	return changed[0] as { id: string; version: number };
}
