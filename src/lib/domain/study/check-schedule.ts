import { addDays, daysBetween, plainDateOf, type PlainDate } from '../../time/dates';
import { planVisits, type PlannedWindow } from '../schedule/window';
import type { Report } from './check';
import { isRandomised, type StudyDefinition } from './definition';

/** Visits, their windows and what is measured at each. */
export function checkSchedule(definition: StudyDefinition, report: Report): void {
	const anchorsHold = checkAnchors(definition, report);
	if (anchorsHold) checkWindows(definition, report);
	checkGrid(definition, report);
	checkPrimary(definition, report);
}

function checkAnchors(definition: StudyDefinition, report: Report): boolean {
	const byKey = new Map(definition.visits.map((visit) => [visit.key, visit]));
	let hold = true;
	definition.visits.forEach((visit, at) => {
		const path = `visits[${at}].anchor`;
		if (visit.anchor === 'randomisation' && !isRandomised(definition))
			report('stops', path, 'ANCHOR_WITHOUT_ARMS');
		if (
			visit.target.unit !== 'month' &&
			(visit.before.unit === 'month' || visit.after.unit === 'month')
		)
			report('stops', `visits[${at}]`, 'WINDOW_MONTHS');
		const passed = new Set([visit.key]);
		let anchor: string = visit.anchor;
		while (anchor.startsWith('visit:')) {
			const key = anchor.slice('visit:'.length);
			const next = byKey.get(key);
			if (!next || passed.has(key)) {
				hold = false;
				if (next && anchor === `visit:${visit.key}` && anchor === visit.anchor)
					report('stops', path, 'ANCHOR_SELF', { visit: visit.name });
				else if (next) report('stops', path, 'ANCHOR_CYCLE', { visit: visit.name });
				else if (anchor === visit.anchor) report('stops', path, 'ANCHOR_UNKNOWN', { anchor: key });
				return;
			}
			passed.add(key);
			anchor = next.anchor;
		}
	});
	return hold;
}

/** Starting days that bring out month ends and leap days: every day of a leap year and of the year after it. */
function startingDays(): PlainDate[] {
	const first = plainDateOf('2028-01-01');
	return Array.from({ length: 731 }, (_, day) => addDays(first, day));
}

/**
 * Visits counted from enrolment and from randomisation cannot be compared, so each anchor is looked at by itself;
 * a visit counted from another visit belongs with that visit.
 */
function checkWindows(definition: StudyDefinition, report: Report): void {
	const position = new Map(definition.visits.map((visit, at) => [visit.key, at]));
	const reported = new Set<string>();
	const once = (key: string, tell: () => void) => {
		if (!reported.has(key)) {
			reported.add(key);
			tell();
		}
	};
	const months = definition.visits.some((visit) =>
		[visit.target.unit, visit.before.unit, visit.after.unit].includes('month')
	);
	const starts = months ? startingDays() : startingDays().slice(0, 1);

	for (const root of ['enrolment', 'randomisation'] as const)
		for (const start of starts) {
			const planned = planVisits(definition, { [root]: start }).filter(
				(each): each is PlannedWindow & { window: NonNullable<PlannedWindow['window']> } =>
					each.window !== null
			);
			for (const { visit, window } of planned) {
				const path = `visits[${position.get(visit.key) ?? 0}]`;
				if (window.earliest > window.latest)
					once(`empty ${visit.key}`, () =>
						report('stops', path, 'WINDOW_EMPTY', { visit: visit.name })
					);
				else if (
					window.earliest === window.latest &&
					visit.key !== definition.baselineVisit &&
					visit.target.amount !== 0
				)
					once(`single ${visit.key}`, () =>
						report('warns', path, 'WINDOW_ONE_DAY', { visit: visit.name })
					);
			}
			for (let at = 1; at < planned.length; at++) {
				const [first, second] = [planned[at - 1], planned[at]];
				if (!first || !second) continue;
				const path = `visits[${position.get(second.visit.key) ?? 0}]`;
				const names = { first: first.visit.name, second: second.visit.name };
				if (second.window.target <= first.window.target)
					once(`order ${second.visit.key}`, () =>
						report('stops', path, 'VISITS_OUT_OF_ORDER', names)
					);
				else if (second.window.earliest <= first.window.latest)
					once(`overlap ${second.visit.key}`, () =>
						report('stops', path, 'WINDOWS_OVERLAP', {
							...names,
							days: daysBetween(second.window.earliest, first.window.latest) + 1,
							example: start
						})
					);
			}
		}
}

function checkGrid(definition: StudyDefinition, report: Report): void {
	const visits = new Map(definition.visits.map((visit) => [visit.key, visit]));
	const measures = new Map(definition.measures.map((measure) => [measure.key, measure]));
	const scheduled = new Set<string>();
	for (const [visitKey, keys] of Object.entries(definition.schedule)) {
		const path = `schedule.${visitKey}`;
		const visit = visits.get(visitKey);
		if (!visit) report('stops', path, 'VISIT_UNKNOWN', { visit: visitKey });
		const here = new Set<string>();
		keys.forEach((key, at) => {
			if (!measures.has(key))
				report('stops', `${path}[${at}]`, 'MEASURE_UNKNOWN', { measure: key });
			if (here.has(key))
				report('stops', `${path}[${at}]`, 'MEASURE_LISTED_TWICE', {
					measure: measures.get(key)?.name ?? key,
					visit: visit?.name ?? visitKey
				});
			here.add(key);
			if (visit) scheduled.add(key);
		});
	}
	definition.visits.forEach((visit, at) => {
		if ((definition.schedule[visit.key] ?? []).length === 0)
			report('warns', `visits[${at}]`, 'VISIT_WITHOUT_MEASURES', { visit: visit.name });
	});
	definition.measures.forEach((measure, at) => {
		if (!scheduled.has(measure.key))
			report('stops', `measures[${at}]`, 'MEASURE_NEVER_SCHEDULED', { measure: measure.name });
	});
}

function checkPrimary(definition: StudyDefinition, report: Report): void {
	const visit = definition.visits.find((each) => each.key === definition.baselineVisit);
	const measure = definition.measures.find((each) => each.key === definition.primaryMeasure);
	if (!visit)
		report('stops', 'baselineVisit', 'VISIT_UNKNOWN', { visit: definition.baselineVisit });
	if (!measure)
		report('stops', 'primaryMeasure', 'MEASURE_UNKNOWN', { measure: definition.primaryMeasure });
	if (!measure) return;
	if (!('unit' in measure))
		report('stops', 'primaryMeasure', 'PRIMARY_NOT_NUMERIC', { measure: measure.name });
	const at = definition.visits.filter((each) =>
		definition.schedule[each.key]?.includes(measure.key)
	);
	if (visit && !at.includes(visit))
		report('stops', 'primaryMeasure', 'PRIMARY_NOT_AT_BASELINE', {
			measure: measure.name,
			visit: visit.name
		});
	if (at.length === 1) report('stops', 'primaryMeasure', 'PRIMARY_ONCE', { measure: measure.name });
}
