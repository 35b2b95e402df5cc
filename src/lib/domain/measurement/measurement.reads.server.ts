import { sql } from 'kysely';
import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may, type Scope } from '$lib/server/permission';
import { unitOfMeasure, type Measure, type RevealingRole } from '../study/definition';
import { definitionOf, type VisitRow } from '../visit/visit.reads.server';

export interface PlannedMeasure {
	measureId: string;
	measure: Measure;
	/** The one role that enters and reads it, where its values could reveal the arm. */
	openTo: RevealingRole | null;
}

/**
 * What is to be measured at the visit, in the schedule's order, by the protocol version it was planned by; without what
 * is kept from the actor.
 */
export async function plannedMeasures(reader: Reader, visit: VisitRow): Promise<PlannedMeasure[]> {
	if (visit.protocolVersionId === null || visit.key === null) return [];
	const definition = await definitionOf(reader, visit.protocolVersionId);
	const rows = await reader
		.selectFrom('planned_measure as pm')
		.innerJoin('planned_visit as pv', 'pv.id', 'pm.planned_visit_id')
		.innerJoin('measure as m', 'm.id', 'pm.measure_id')
		.select(['m.id', 'm.key', 'm.open_to'])
		.where('pv.protocol_version_id', '=', visit.protocolVersionId)
		.where('pv.key', '=', visit.key)
		.where(sql<boolean>`app.may_see(m.open_to, ${visit.studyId}::uuid, ${visit.site.id}::uuid)`)
		.orderBy('m.position')
		.execute();
	const order = definition.schedule[visit.key] ?? [];
	const measures = new Map(definition.measures.map((each) => [each.key, each]));
	return rows
		.flatMap((row) => {
			const measure = measures.get(row.key);
			return measure ? [{ measureId: row.id, measure, openTo: row.open_to }] : [];
		})
		.sort((a, b) => order.indexOf(a.measure.key) - order.indexOf(b.measure.key));
}

/** Open measures are entered by those who measure; one that could reveal the arm only by the role it names. */
export const mayEnter = (actor: Actor, scope: Scope, { openTo }: PlannedMeasure): boolean =>
	openTo === null
		? may(actor.grants, 'visit.measure', scope)
		: actor.grants.some(
				(grant) =>
					grant.role === openTo &&
					grant.studyId === scope.studyId &&
					(grant.siteId === null || grant.siteId === scope.siteId)
			);

const columns = [
	'id',
	'measure_id',
	'value',
	'text_value',
	'readings',
	'unit',
	'entered_value',
	'entered_unit',
	'entered_readings',
	'not_done_reason',
	'soft_answer',
	'comment',
	'taken_at',
	'entered_at',
	'taken_by',
	'source',
	'version'
] as const;

export async function valuesAtVisit(reader: Reader, visitId: string) {
	const rows = await reader
		.selectFrom('measurement')
		.select(columns)
		.where('visit_id', '=', visitId)
		.execute();
	return new Map(rows.map((row) => [row.measure_id, row]));
}
export type MeasurementRow =
	Awaited<ReturnType<typeof valuesAtVisit>> extends Map<string, infer Row> ? Row : never;

export interface EarlierValue {
	measureKey: string;
	visitKey: string | null;
	visitName: string;
	position: number;
	value: number;
	unit: string;
}

/** The subject's numbers at earlier visits, oldest first. Keys stay the same from one protocol version to the next. */
export async function earlierValues(
	reader: Reader,
	visit: VisitRow,
	keys: readonly string[]
): Promise<EarlierValue[]> {
	if (keys.length === 0) return [];
	const rows = await reader
		.selectFrom('measurement as n')
		.innerJoin('measure as m', 'm.id', 'n.measure_id')
		.innerJoin('visit as v', 'v.id', 'n.visit_id')
		.leftJoin('planned_visit as pv', 'pv.id', 'v.planned_visit_id')
		.select(['m.key', 'pv.key as visit_key', 'v.name', 'v.position', 'n.value', 'n.unit'])
		.where('n.subject_id', '=', visit.subjectId)
		.where('m.key', 'in', keys)
		.where('v.position', '<', visit.position)
		.where('n.value', 'is not', null)
		.orderBy('v.position')
		.execute();
	return rows.flatMap((row) =>
		row.value === null
			? []
			: [
					{
						measureKey: row.key,
						visitKey: row.visit_key,
						visitName: row.name,
						position: row.position,
						value: row.value,
						unit: row.unit
					}
				]
	);
}

/** Values in another unit than the measure has today (an amendment changed it) are no ground for a limit. */
export function lastAndBaseline(
	measure: Measure,
	earlier: readonly EarlierValue[],
	baselineVisit: string
): { last: number | null; baseline: number | null } {
	const mine = earlier.filter(
		(each) => each.measureKey === measure.key && each.unit === unitOfMeasure(measure)
	);
	return {
		last: mine.at(-1)?.value ?? null,
		baseline: mine.find((each) => each.visitKey === baselineVisit)?.value ?? null
	};
}

export interface ToRecord {
	visitId: string;
	number: string;
	visit: string;
	measures: string[];
	/** The day of the visit. */
	on: string;
}

/** Measures that only the actor's own role enters and that visits under way or over still lack, oldest first. */
export const findToRecord = (actor: Actor, studyId: string): Promise<ToRecord[]> =>
	read(actor, 'visit.record', { studyId }, async (reader) => {
		const { rows } = await sql<ToRecord>`
			select v.id as "visitId", s.number, v.name as visit, v.happened_on::text as on,
				array_agg(m.name order by m.position) as measures
			from app.visit v
			join app.subject s on s.id = v.subject_id
			join app.planned_measure pm on pm.planned_visit_id = v.planned_visit_id
			join app.measure m on m.id = pm.measure_id and m.open_to is not null and m.kind <> 'derived'
			where v.study_id = ${studyId}::uuid and v.status in ('under way', 'completed')
				and app.has_role(array[m.open_to], v.study_id, v.site_id)
				and not exists (select from app.measurement n where n.visit_id = v.id and n.measure_id = m.id)
			group by v.id, s.number, v.name, v.happened_on
			order by v.happened_on, s.number limit 200`.execute(reader);
		return rows;
	});
