import { StatsError } from './errors.js';
import type { AnalysisPlan } from './plan.js';

const bad = (sentence: string, path: string) => new StatsError('bad-plan', sentence, { path });

/** What needs a column of visits, in the order a reader would look for it. */
function needsVisit(plan: AnalysisPlan): { what: string; path: string } | null {
	const { mean, errors } = plan;
	if (mean.time === 'categorical') return { what: 'Visits as categories', path: 'mean.time' };
	if (plan.visitEffects) return { what: 'A visit effect', path: 'visitEffects' };
	if (errors.varianceBy === 'visit')
		return { what: 'A variance for each visit', path: 'errors.varianceBy' };
	const { structure, along } = errors;
	if (structure === 'toeplitz' || structure === 'unstructured')
		return { what: `The error structure ${structure}`, path: 'errors.structure' };
	const serial = structure === 'serial' || structure === 'serial-with-noise';
	return serial && along === 'visit'
		? { what: 'Serial errors along visits', path: 'errors.along' }
		: null;
}

function checkColumns(plan: AnalysisPlan): void {
	const others: [string, string | null | undefined][] = [
		['subject', plan.subject],
		['time', plan.time],
		['visit', plan.visit],
		['group', plan.group],
		...plan.mean.covariates.map((c, i): [string, string | null] => [
			`mean.covariates[${i}].name`,
			c.kind === 'baseline' ? null : c.name
		])
	];
	for (const [path, column] of others) {
		if (column === plan.outcome) {
			throw bad(
				`The column “${column}” is the outcome and also ${path}; an outcome cannot explain itself.`,
				path
			);
		}
	}
	const visit = plan.visit ? null : needsVisit(plan);
	if (visit) {
		throw bad(
			`${visit.what} (${visit.path}) needs the plan to name a column of visits in “visit”.`,
			visit.path
		);
	}
	if (plan.errors.varianceBy === 'group' && !plan.group) {
		throw bad(
			'A variance for each group (errors.varianceBy) needs the plan to name a column of groups in “group”.',
			'errors.varianceBy'
		);
	}
}

function checkMean({ mean, group }: AnalysisPlan): void {
	const { time } = mean;
	if (typeof time === 'object' && 'knots' in time) {
		const { knots } = time;
		if (knots.length === 0 || !knots.every(Number.isFinite) || new Set(knots).size < knots.length) {
			throw bad(
				'The knots (mean.time.knots) must be one or more finite times, each given once.',
				'mean.time.knots'
			);
		}
	}
	if (typeof time === 'object' && 'degree' in time) {
		if (!(Number.isInteger(time.degree) && time.degree >= 1 && time.degree <= 6)) {
			throw bad(
				`The degree of the polynomial (mean.time.degree) is ${time.degree}; it must be a whole number from 1 to 6.`,
				'mean.time.degree'
			);
		}
	}
	const baselines = mean.covariates.filter((c) => c.kind === 'baseline').length;
	if (baselines > 1)
		throw bad('The baseline covariate (mean.covariates) is named twice.', 'mean.covariates');
	if (!mean.commonBaseline) return;
	if (baselines > 0) {
		throw bad(
			'A common baseline (mean.commonBaseline) and the baseline as a covariate exclude each other: the one takes the baseline as an outcome, the other takes it out of the outcomes.',
			'mean.commonBaseline'
		);
	}
	if (group && (time === 'none' || !mean.groupByTime)) {
		throw bad(
			'A common baseline (mean.commonBaseline) needs time in the mean and a course of its own for each group (mean.groupByTime); without them the groups could not differ at all.',
			'mean.commonBaseline'
		);
	}
}

function checkIdentified(plan: AnalysisPlan): void {
	const { structure } = plan.errors;
	const level = plan.subjectEffects !== 'none' && plan.subjectEffects !== 'slope';
	if (level && ['compound-symmetry', 'toeplitz', 'unstructured'].includes(structure)) {
		throw new StatsError(
			'not-identified',
			`A level of each subject cannot be told from errors that are ${structure}, which already let any two outcomes of a subject be correlated. Set subjectEffects to “none”, or errors.structure to “independent” or “serial”.`,
			{ path: 'subjectEffects' }
		);
	}
	if (plan.visitEffects && plan.mean.time === 'categorical') {
		throw new StatsError(
			'not-identified',
			'A visit effect shared by all cannot be told from visits as categories in the mean, which already give each visit a level of its own. Leave one of them out.',
			{ path: 'visitEffects' }
		);
	}
}

/**
 * Refuses a plan whose parts do not fit together; says nothing otherwise.
 * Errors: `bad-plan`, `not-identified`, `kenward-roger-needs-reml`.
 */
export function checkPlan(plan: AnalysisPlan): void {
	checkColumns(plan);
	checkMean(plan);
	checkIdentified(plan);
	if (plan.method === 'ml' && plan.degreesOfFreedom === 'kenward-roger') {
		throw new StatsError(
			'kenward-roger-needs-reml',
			'Kenward–Roger degrees of freedom are defined for REML only. Set method to “reml”, or degreesOfFreedom to “satterthwaite”.',
			{ path: 'degreesOfFreedom' }
		);
	}
	const { confidence } = plan;
	if (confidence !== undefined && !(confidence > 0 && confidence < 1)) {
		throw bad(
			`The confidence of the intervals (confidence) is ${confidence}; it must lie between 0 and 1.`,
			'confidence'
		);
	}
}
