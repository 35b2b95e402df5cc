import { openTo, studyDefinition, type StudyDefinition } from '../study/definition';
import type { Reader } from '$lib/server/change';
import { isUnit } from '../../units/units';
import { rowsAsOf } from './as-of.server';
import type { CutContent, CutMeasure, CutSubject, CutValue, CutVisit } from './content';

interface MeasurementRow {
	visit_id: string;
	measure_id: string;
	value: number | null;
	text_value: string | null;
	readings: number[] | null;
	unit: string;
	not_done_reason: string | null;
	taken_at: string | null;
	entered_at: string;
	source: CutValue['source'];
	open_to: string | null;
}
interface VisitRow {
	id: string;
	subject_id: string;
	planned_visit_id: string | null;
	name: string;
	position: number;
	status: string;
	happened_on: string | null;
	study_time: number | null;
}
interface SubjectRow {
	id: string;
	site_id: string;
	number: string;
	imported_as: string | null;
	enrolled_on: string;
	randomised_on: string | null;
	stratum: CutSubject['stratum'];
	characteristics: CutSubject['characteristics'];
}
interface ExitRow {
	id: string;
	subject_id: string;
	kind: string;
	happened_on: string;
	/** Put back by a correction: as if it had not been said. */
	taken_back_at: string | null;
}
interface SiteRow {
	id: string;
	code: string;
	name: string;
}

const iso = (text: string) => new Date(text).toISOString();
const byText = (a: string, b: string) => (a < b ? -1 : a > b ? 1 : 0);

function valueOf(row: MeasurementRow): CutValue {
	return {
		value: row.value,
		text: row.text_value,
		readings: row.readings,
		unit: row.unit,
		notDone: row.not_done_reason,
		takenAt: row.taken_at === null ? null : iso(row.taken_at),
		enteredAt: iso(row.entered_at),
		source: row.source
	};
}

function measureOf(measure: StudyDefinition['measures'][number]): CutMeasure {
	const unit = 'unit' in measure ? measure.unit : null;
	return {
		key: measure.key,
		name: measure.name,
		kind: measure.kind,
		unit: unit !== null && isUnit(unit) ? unit : null,
		decimals:
			measure.kind === 'repeated'
				? measure.summaryDecimals
				: 'decimals' in measure
					? measure.decimals
					: 0
	};
}

/** Groups by a key, keeping the order. */
function grouped<T>(rows: readonly T[], key: (row: T) => string): Map<string, T[]> {
	const groups = new Map<string, T[]>();
	for (const row of rows) {
		const group = groups.get(key(row));
		if (group) group.push(row);
		else groups.set(key(row), [row]);
	}
	return groups;
}

/** Every measure that a published version knew by then; the newest wording of each. */
async function definitions(reader: Reader, studyId: string, cutOff: Date) {
	const versions = await reader
		.selectFrom('protocol_version')
		.select(['number', 'definition'])
		.where('study_id', '=', studyId)
		.where('status', '=', 'published')
		.where('published_at', '<=', cutOff)
		.orderBy('number', 'desc')
		.execute();
	const parsed = versions.map(({ number, definition }) => ({
		number,
		definition: studyDefinition.parse(definition)
	}));
	const measures = new Map<string, CutMeasure>();
	const hidden = new Set(parsed.flatMap(({ definition }) => [...openTo(definition).keys()]));
	for (const { definition } of parsed)
		for (const measure of definition.measures)
			if (!hidden.has(measure.key) && !measures.has(measure.key))
				measures.set(measure.key, measureOf(measure));
	return { newest: parsed[0], measures };
}

/** The study as it stood at the cut-off; null when it had no published protocol version then. */
export async function snapshot(
	reader: Reader,
	studyId: string,
	cutOff: Date
): Promise<CutContent | null> {
	const { newest, measures } = await definitions(reader, studyId, cutOff);
	if (!newest) return null;
	// What belongs to something is read before that something: a row that appears meanwhile has its owner there.
	// A cut is read by the masked: what could reveal the arm is no part of it, whoever makes it.
	const values = (await rowsAsOf<MeasurementRow>(reader, 'measurement', studyId, cutOff)).filter(
		(row) => row.open_to === null
	);
	const exits = (await rowsAsOf<ExitRow>(reader, 'study_exit', studyId, cutOff)).filter(
		(exit) => exit.taken_back_at === null
	);
	const visits = await rowsAsOf<VisitRow>(reader, 'visit', studyId, cutOff);
	const subjects = await rowsAsOf<SubjectRow>(reader, 'subject', studyId, cutOff);
	const sites = await rowsAsOf<SiteRow>(reader, 'site', studyId, cutOff);
	const keys = async (table: 'measure' | 'planned_visit') =>
		new Map(
			(
				await reader
					.selectFrom(table)
					.select(['id', 'key'])
					.where('study_id', '=', studyId)
					.execute()
			).map(({ id, key }) => [id, key])
		);
	const measureKeys = await keys('measure');
	const visitKeys = await keys('planned_visit');
	const siteCodes = new Map(sites.map(({ id, code }) => [id, code]));
	const valuesOf = grouped(values, (row) => row.visit_id);
	const visitsOf = grouped(visits, (row) => row.subject_id);
	const exitsOf = grouped(exits, (row) => row.subject_id);

	const visitOf = (row: VisitRow): CutVisit => ({
		key: row.planned_visit_id === null ? null : (visitKeys.get(row.planned_visit_id) ?? null),
		name: row.name,
		position: row.position,
		status: row.status,
		happenedOn: row.happened_on,
		studyTime: row.study_time,
		values: Object.fromEntries(
			(valuesOf.get(row.id) ?? []).map((value) => [
				measureKeys.get(value.measure_id) ?? value.measure_id,
				valueOf(value)
			])
		)
	});
	// A visit that is still to come says nothing yet.
	const hasHappened = (visit: CutVisit) =>
		(visit.status !== 'planned' && visit.status !== 'booked') ||
		Object.keys(visit.values).length > 0;
	const subjectOf = (row: SubjectRow): CutSubject => ({
		id: row.id,
		number: row.number,
		importedAs: row.imported_as,
		site: siteCodes.get(row.site_id) ?? row.site_id,
		enrolledOn: row.enrolled_on,
		randomisedOn: row.randomised_on,
		stratum: row.stratum,
		characteristics: row.characteristics,
		exits: (exitsOf.get(row.id) ?? [])
			.sort((a, b) => byText(a.happened_on, b.happened_on) || byText(a.id, b.id))
			.map((exit) => ({ kind: exit.kind, on: exit.happened_on })),
		visits: (visitsOf.get(row.id) ?? [])
			.sort((a, b) => a.position - b.position || byText(a.id, b.id))
			.map(visitOf)
			.filter(hasHappened)
	});
	return {
		format: 'heddle.cut/1',
		study: studyId,
		cutOffAt: cutOff.toISOString(),
		protocolVersion: newest.number,
		anchor: newest.definition.arms.length >= 2 ? 'randomisation' : 'enrolment',
		timeUnit: newest.definition.timeUnit,
		baselineVisit: newest.definition.baselineVisit,
		measures: [...measures.values()].sort((a, b) => byText(a.key, b.key)),
		characteristics: newest.definition.characteristics,
		sites: sites.map(({ code, name }) => ({ code, name })).sort((a, b) => byText(a.code, b.code)),
		subjects: subjects
			.sort((a, b) => byText(a.number, b.number) || byText(a.id, b.id))
			.map(subjectOf)
	};
}
