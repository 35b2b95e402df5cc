import type { Actor } from '$lib/server/actor';
import { read, type Reader } from '$lib/server/change';
import { may } from '$lib/server/permission';
import { shortDateText } from '$lib/time/dates';
import { dateInZone, instantText, timeInZone } from '$lib/time/zones';
import { placementOf, windowText } from '../schedule/window';
import type { Measure } from '../study/definition';
import {
	definitionOf,
	getVisit,
	scopeOfVisit,
	visitsEndedOn,
	type VisitRow
} from '../visit/visit.reads.server';
import { characteristicsOf } from './derived.server';
import {
	earlierValues,
	mayEnter,
	plannedMeasures,
	valuesAtVisit,
	type EarlierValue,
	type MeasurementRow
} from './measurement.reads.server';
import type { KeptValue, MeasureView, VisitForm } from './visit-form';

/** The measure without the limits that only ask: what is usual must not steer what is entered. */
function withoutSoftLimits(measure: Measure): Measure {
	if (measure.kind !== 'number' && measure.kind !== 'repeated') return measure;
	const { softLow, softHigh, softChange, ...shown } = measure;
	void [softLow, softHigh, softChange];
	return shown;
}

function keptOf(row: MeasurementRow, names: ReadonlyMap<string, string>, zone: string): KeptValue {
	return {
		version: row.version,
		value: row.value,
		text: row.text_value,
		readings: row.readings,
		enteredValue: row.entered_value,
		enteredUnit: row.entered_unit,
		enteredReadings: row.entered_readings,
		notDone: row.not_done_reason,
		softAnswer: row.soft_answer,
		comment: row.comment,
		takenAt: row.taken_at?.toISOString() ?? null,
		takenOn: row.taken_at ? dateInZone(row.taken_at, zone) : null,
		takenTime: row.taken_at ? timeInZone(row.taken_at, zone) : null,
		takenText: row.taken_at ? instantText(row.taken_at, zone) : null,
		enteredText: instantText(row.entered_at, zone),
		takenBy: names.get(row.taken_by) ?? '',
		source: row.source
	};
}

/** Earlier values go out only where the measure lets them be seen: before the entry, after it, or never. */
function earlierFor(
	measure: Measure,
	entered: boolean,
	earlier: readonly EarlierValue[]
): MeasureView['earlier'] {
	if (measure.showLast === 'never' || (measure.showLast === 'after' && !entered)) return [];
	return earlier
		.filter((each) => each.measureKey === measure.key)
		.map((each) => ({ visit: each.visitName, value: each.value }));
}

/** Only what a formula of this visit asks for leaves the server. */
function neededBy(measures: readonly Measure[]): Set<string> {
	const needed = new Set<string>();
	for (const measure of measures)
		if (measure.kind === 'derived')
			for (const reference of Object.values(measure.derivedBy.inputs)) {
				const [kind, key] = reference.split(':');
				if (key && kind !== 'measure') needed.add(key);
			}
	return needed;
}

async function namesOf(reader: Reader, ids: readonly string[]): Promise<Map<string, string>> {
	if (ids.length === 0) return new Map();
	const rows = await reader
		.selectFrom('person')
		.select(['id', 'name'])
		.where('id', 'in', [...new Set(ids)])
		.execute();
	return new Map(rows.map((row) => [row.id, row.name]));
}

function placeText(visit: VisitRow): string {
	if (!visit.window) return 'The window is not known yet.';
	const day = visit.happenedOn ?? visit.today;
	const { place, days } = placementOf(visit.window, day);
	const said =
		place === 'in-window'
			? 'in the window'
			: `${days} day${days === 1 ? '' : 's'} ${place === 'early' ? 'before the window' : 'after the window'}`;
	return `${visit.happenedOn ? shortDateText(visit.happenedOn) : 'Today'} is ${said} (${windowText(visit.window)}).`;
}

/** What the page of one visit shows, for whoever measures and for whoever only reads. */
export async function getVisitForm(
	actor: Actor,
	studyId: string,
	visitId: string
): Promise<VisitForm> {
	const scope = await scopeOfVisit(actor, 'subject.read', studyId, visitId);
	return read(actor, 'subject.read', scope, async (reader) => {
		const visit = await getVisit(reader, studyId, visitId);
		const planned = await plannedMeasures(reader, visit);
		const values = await valuesAtVisit(reader, visitId);
		const mayMeasure = may(actor.grants, 'visit.measure', scope);
		const mayRecord = planned.some((each) => mayEnter(actor, scope, each));
		const entering = mayRecord && (visit.status === 'under way' || visit.status === 'completed');
		const names = await namesOf(
			reader,
			[...values.values()].map((each) => each.taken_by)
		);
		const earlier = entering
			? await earlierValues(
					reader,
					visit,
					planned.map((each) => each.measure.key)
				)
			: [];
		const definition =
			visit.protocolVersionId === null ? null : await definitionOf(reader, visit.protocolVersionId);
		const needed = neededBy(planned.map((each) => each.measure));
		const characteristics =
			definition && entering && needed.size > 0
				? await characteristicsOf(reader, definition, visit.subjectId)
				: {};
		return {
			visit: {
				id: visit.id,
				subjectId: visit.subjectId,
				number: visit.number,
				name: visit.name,
				status: visit.status,
				version: visit.version,
				happenedOn: visit.happenedOn,
				happenedText: visit.happenedOn ? shortDateText(visit.happenedOn) : null,
				missedReason: visit.missedReason,
				window: visit.window,
				placeText: placeText(visit),
				site: visit.site.name,
				zone: visit.site.zone,
				today: visit.today,
				left: (await visitsEndedOn(reader, visit.subjectId)) !== null
			},
			may: {
				measure: mayMeasure,
				record: mayRecord,
				book: may(actor.grants, 'visit.book', scope),
				chase: may(actor.grants, 'visit.chase', scope)
			},
			measures: planned.map((each) => {
				const { measureId, measure, openTo } = each;
				const row = values.get(measureId);
				return {
					measureId,
					mayEnter: mayEnter(actor, scope, each),
					openTo,
					measure: withoutSoftLimits(measure),
					kept: row ? keptOf(row, names, visit.site.zone) : null,
					earlier: earlierFor(measure, row !== undefined, earlier)
				};
			}),
			others: otherValues(planned, values),
			comparisons: definition?.comparisons ?? [],
			characteristics: Object.fromEntries(
				Object.entries(characteristics).filter(([key]) => needed.has(key))
			)
		};
	});
}

/** Values that the schedule did not ask for: an import may bring some. */
function otherValues(
	planned: readonly { measureId: string }[],
	values: ReadonlyMap<string, MeasurementRow>
): number {
	const known = new Set(planned.map((each) => each.measureId));
	return [...values.keys()].filter((id) => !known.has(id)).length;
}
