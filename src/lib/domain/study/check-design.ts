import { stratumKeys } from '../randomisation/strata';
import type { Report } from './check';
import type { StudyDefinition } from './definition';

/** Fewer subjects in a stratum than this seldom complete a block of any usual size. Common practice. */
const leastInStratum = 4;

/** Strata in which there can be no subjects, enrolment plans, closures, minors, and visits too long. */
export function checkDesign(definition: StudyDefinition, report: Report): void {
	checkStrata(definition, report);
	checkPlan(definition, report);
	checkClosures(definition, report);
	checkMinors(definition, report);
	definition.visits.forEach((visit, at) => {
		if (visit.lengthMinutes > longestMinutes)
			report('stops', `visits[${at}].lengthMinutes`, 'VISIT_TOO_LONG', {
				visit: visit.name,
				minutes: visit.lengthMinutes,
				most: longestMinutes
			});
	});
}

/** The longest a visit can hold a room, as the table of bookings has it. */
const longestMinutes = 720;

function checkStrata(definition: StudyDefinition, report: Report): void {
	definition.strata.forEach((stratum, at) => {
		const names = new Set<string>();
		for (const level of stratum.levels) {
			const name = level.name.trim().toLowerCase();
			if (names.has(name))
				report('stops', `strata[${at}].levels`, 'LEVEL_TWICE', {
					stratum: stratum.name,
					level: level.name
				});
			names.add(name);
		}
		// A stratum that bears the key of a characteristic is that characteristic: its levels are among the choices.
		const asked = definition.characteristics.find((each) => each.key === stratum.key);
		if (asked?.kind === 'choice')
			for (const level of stratum.levels)
				if (!asked.choices.some((choice) => choice.key === level.key))
					report('stops', `strata[${at}].levels`, 'LEVEL_NOT_A_CHOICE', {
						stratum: stratum.name,
						level: level.name
					});
	});
	if (definition.stratifyBySite)
		for (const { site, subjects } of definition.enrolmentPlan?.sites ?? [])
			if (subjects === 0)
				report('warns', 'enrolmentPlan', 'STRATUM_SITE_EMPTY', {
					site: definition.sites.find((each) => each.code === site)?.name ?? site
				});
	// Minimisation balances the factors one by one, not each combination of them.
	const subjects = definition.plannedSubjects;
	if (definition.allocation?.method === 'minimisation' || subjects === undefined) return;
	if (definition.strata.length === 0 && !definition.stratifyBySite) return;
	const strata = stratumKeys(definition).length;
	const path = definition.strata.length > 0 ? 'strata' : 'stratifyBySite';
	if (strata > subjects) report('stops', path, 'STRATA_TOO_MANY', { strata, subjects });
	else if (strata * leastInStratum > subjects)
		report('warns', path, 'STRATA_THIN', { strata, subjects, least: leastInStratum });
}

function checkPlan(definition: StudyDefinition, report: Report): void {
	const plan = definition.enrolmentPlan;
	if (!plan) return;
	const codes = new Set(definition.sites.map((site) => site.code));
	for (const { site } of plan.sites)
		if (!codes.has(site)) report('stops', 'enrolmentPlan', 'PLAN_SITE_UNKNOWN', { site });
	const planned = plan.sites.reduce((sum, each) => sum + each.subjects, 0);
	const subjects = definition.plannedSubjects;
	if (subjects !== undefined && planned !== subjects)
		report('warns', 'enrolmentPlan', 'PLAN_DIFFERS', { planned, subjects });
}

function checkClosures(definition: StudyDefinition, report: Report): void {
	definition.sites.forEach((site, at) =>
		site.closures?.forEach(({ from, to }, index) => {
			if (to < from)
				report('stops', `sites[${at}].closures[${index}]`, 'CLOSURE_INSIDE_OUT', {
					site: site.name,
					from,
					to
				});
		})
	);
}

function checkMinors(definition: StudyDefinition, report: Report): void {
	const { minors } = definition;
	if (!minors) return;
	if (minors.assentFrom >= minors.majority)
		report('stops', 'minors', 'MINORS_INSIDE_OUT', {
			assent: minors.assentFrom,
			majority: minors.majority
		});
	if (!definition.characteristics.some((each) => each.kind === 'birth-date'))
		report('warns', 'minors', 'MINORS_WITHOUT_BIRTH_DATE');
}
