import { converts } from '../../units/convert';
import { minutesOfTime } from '../../time/zones';
import { problem, type Facts, type ProblemCode } from '../problems';
import { checkDerived } from './check-derived';
import { checkDesign } from './check-design';
import { checkMasking } from './check-masking';
import { checkSchedule } from './check-schedule';
import { isRandomised, type Measure, type StudyDefinition } from './definition';
import type { LocatedProblem } from './template';

/** A finding that `stops` publishing has to be mended first; one that `warns` is for a person to weigh. */
export type Finding = LocatedProblem & { weight: 'stops' | 'warns' };

export type Report = (
	weight: Finding['weight'],
	path: string,
	code: ProblemCode,
	facts?: Facts
) => void;

/** What is wrong or doubtful in a draft, before it is published. A definition without a `stops` may be published. */
export function checkDefinition(definition: StudyDefinition): Finding[] {
	const findings: Finding[] = [];
	const report: Report = (weight, path, code, facts = {}) => {
		findings.push({ weight, path, problem: problem(code, facts) });
	};
	checkKeys(definition, report);
	checkArms(definition, report);
	checkSchedule(definition, report);
	definition.measures.forEach((measure, at) => checkMeasure(measure, `measures[${at}]`, report));
	checkDerived(definition, report);
	checkMasking(definition, report);
	checkComparisons(definition, report);
	checkSites(definition, report);
	checkDesign(definition, report);
	if (definition.consentVersions.length === 0)
		report('stops', 'consentVersions', 'CONSENT_VERSION_MISSING');
	if (definition.eligibility.length === 0) report('warns', 'eligibility', 'ELIGIBILITY_MISSING');
	return findings;
}

export const mayPublish = (findings: readonly Finding[]): boolean =>
	findings.every((finding) => finding.weight !== 'stops');

function checkKeys(definition: StudyDefinition, report: Report): void {
	const lists: [string, string, string[]][] = [
		['arms', 'arm', definition.arms.map((each) => each.key)],
		['strata', 'stratum', definition.strata.map((each) => each.key)],
		['sites', 'site', definition.sites.map((each) => each.code)],
		['characteristics', 'characteristic', definition.characteristics.map((each) => each.key)],
		['visits', 'visit', definition.visits.map((each) => each.key)],
		['measures', 'measure', definition.measures.map((each) => each.key)],
		['eligibility', 'criterion', definition.eligibility.map((each) => each.key)],
		['consentVersions', 'consent version', definition.consentVersions.map((each) => each.version)]
	];
	definition.strata.forEach((stratum, at) =>
		lists.push([`strata[${at}].levels`, 'level', stratum.levels.map((level) => level.key)])
	);
	definition.sites.forEach((site, at) =>
		lists.push([`sites[${at}].rooms`, 'room', site.rooms.map((room) => room.key)])
	);
	for (const [name, what] of [
		['characteristics', 'choice'],
		['measures', 'choice']
	] as const)
		definition[name].forEach((each, at) => {
			if (each.kind === 'choice')
				lists.push([`${name}[${at}].choices`, what, each.choices.map((choice) => choice.key)]);
		});

	for (const [path, what, keys] of lists) {
		const seen = new Set<string>();
		keys.forEach((key, at) => {
			if (seen.has(key)) report('stops', `${path}[${at}]`, 'KEY_TWICE', { key, what });
			seen.add(key);
		});
	}
}

function checkArms(definition: StudyDefinition, report: Report): void {
	if (definition.masked && definition.arms.length < 2) report('stops', 'arms', 'ARMS_TOO_FEW');
	if (!isRandomised(definition) && (definition.strata.length > 0 || definition.stratifyBySite))
		report(
			'stops',
			definition.strata.length > 0 ? 'strata' : 'stratifyBySite',
			'STRATA_WITHOUT_ARMS'
		);
}

function checkMeasure(measure: Measure, path: string, report: Report): void {
	if (measure.kind !== 'number' && measure.kind !== 'repeated') return;
	const { hardLow, hardHigh, softLow, softHigh } = measure;
	const name = measure.name;
	for (const [kind, low, high] of [
		['hard', hardLow, hardHigh],
		['soft', softLow, softHigh]
	] as const)
		if (low !== undefined && high !== undefined && low >= high)
			report('stops', path, 'LIMITS_INSIDE_OUT', { measure: name, kind, low, high });
	const outside: [number | undefined, number | undefined, boolean][] = [
		[softLow, hardLow, softLow !== undefined && hardLow !== undefined && softLow < hardLow],
		[softHigh, hardHigh, softHigh !== undefined && hardHigh !== undefined && softHigh > hardHigh],
		[softLow, hardHigh, softLow !== undefined && hardHigh !== undefined && softLow > hardHigh],
		[softHigh, hardLow, softHigh !== undefined && hardLow !== undefined && softHigh < hardLow]
	];
	for (const [soft, hard, wrong] of outside)
		if (wrong && soft !== undefined && hard !== undefined)
			report('stops', path, 'LIMITS_SOFT_OUTSIDE_HARD', { measure: name, soft, hard });
	if (hardLow === undefined && hardHigh === undefined)
		report('warns', path, 'LIMITS_MISSING', { measure: name });
	measure.alsoIn?.forEach((unit, at) => {
		if (!converts(unit, measure.unit, measure.analyte))
			report('stops', `${path}.alsoIn[${at}]`, 'UNIT_DOES_NOT_CONVERT', {
				from: unit,
				to: measure.unit
			});
	});
	if (measure.kind === 'repeated') {
		const { readings, readingsNeeded } = measure;
		const least = measure.summary === 'mean-without-first' ? 2 : 1;
		if (readingsNeeded > readings || readingsNeeded < least)
			report('stops', path, 'READINGS_TOO_FEW', {
				measure: name,
				needed: Math.max(readingsNeeded, least),
				readings
			});
	}
}

function checkComparisons(definition: StudyDefinition, report: Report): void {
	const byKey = new Map(definition.measures.map((each) => [each.key, each]));
	definition.comparisons.forEach((comparison, at) => {
		const path = `comparisons[${at}]`;
		const [lower, higher] = [byKey.get(comparison.lower), byKey.get(comparison.higher)];
		for (const [key, found] of [
			[comparison.lower, lower],
			[comparison.higher, higher]
		] as const)
			if (!found) report('stops', path, 'MEASURE_UNKNOWN', { measure: key });
		if (!lower || !higher) return;
		const units = ['unit' in lower ? lower.unit : null, 'unit' in higher ? higher.unit : null];
		const [from, to] = units;
		if (!from || !to || !converts(from, to))
			report('stops', path, 'UNIT_DOES_NOT_CONVERT', {
				from: from ?? lower.name,
				to: to ?? higher.name
			});
	});
}

function checkSites(definition: StudyDefinition, report: Report): void {
	if (definition.sites.length === 0) report('stops', 'sites', 'SITES_MISSING');
	definition.sites.forEach((site, at) => {
		const path = `sites[${at}]`;
		if (site.openingHours.length === 0)
			report('warns', path, 'OPENING_HOURS_MISSING', { site: site.name });
		const spans = site.openingHours.map((hours) => ({
			weekday: hours.weekday,
			from: minutesOfTime(hours.opens) ?? 0,
			to: minutesOfTime(hours.closes) ?? 0
		}));
		let longest = 0;
		spans.forEach((span, index) => {
			const hours = site.openingHours[index];
			if (span.to <= span.from)
				report('stops', `${path}.openingHours[${index}]`, 'OPENING_HOURS_INSIDE_OUT', {
					opens: hours?.opens ?? '',
					closes: hours?.closes ?? ''
				});
			longest = Math.max(longest, span.to - span.from);
			const clash = spans
				.slice(0, index)
				.some(
					(other) => other.weekday === span.weekday && other.from < span.to && span.from < other.to
				);
			if (clash)
				report('stops', `${path}.openingHours[${index}]`, 'OPENING_HOURS_OVERLAP', {
					weekday: span.weekday
				});
		});
		if (longest > 0)
			for (const visit of definition.visits)
				if (visit.lengthMinutes > longest)
					report('warns', path, 'OPENING_HOURS_TOO_SHORT', {
						visit: visit.name,
						minutes: visit.lengthMinutes,
						site: site.name
					});
	});
}
