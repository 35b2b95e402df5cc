import { buildDesign, type Design } from '../design/design.js';
import { ENGINE_VERSION } from '../engine.js';
import { StatsError } from '../errors.js';
import { fitMixed } from '../fit/fit-mixed.js';
import { testContrast } from '../inference/contrast.js';
import { precisionRule } from '../inference/degrees-of-freedom.js';
import { effectiveSampleSize } from '../inference/effective-size.js';
import { varianceIntervals } from '../inference/variance-intervals.js';
import { covarianceOfCoefficients } from '../numeric/orthonormal.js';
import { averageCovariates, fittedLines, timeRanges } from '../prediction/lines.js';
import { residualPoints } from '../prediction/residuals.js';
import { subjectEffects } from '../prediction/subject-effects.js';
import { trajectories } from '../prediction/trajectories.js';
import type {
	GroupSummary,
	GrowthOptions,
	GrowthResult,
	GrowthRow,
	GrowthSpec,
	IntervalEstimate,
	ModelDescription,
	VarianceComponent
} from '../types.js';
import { contrastsOf } from './contrasts.js';
import { notesOf } from './notes.js';
import { settle, type SettledOptions } from './options.js';

function describe(design: Design, options: SettledOptions): ModelDescription {
	const ranges = timeRanges(design);
	return {
		method: options.method,
		randomIntercept: options.randomIntercept,
		degreesOfFreedom: options.degreesOfFreedom,
		confidence: options.confidence,
		terms: design.names,
		groupLevels: design.groups,
		groupByTime: design.groupByTime,
		covariates: design.covariates,
		linesAt: averageCovariates(design).map(({ name, value }) => ({ name, value })),
		timeRange: {
			from: Math.min(...ranges.map((r) => r.from)),
			to: Math.max(...ranges.map((r) => r.to))
		}
	};
}

function groupSummaries(design: Design): GroupSummary[] {
	const summaries = design.groups.map((name) => ({ name, subjects: 0, observations: 0 }));
	if (summaries.length === 0) return summaries;
	for (const group of design.subjectGroup) summaries[group]!.subjects++;
	for (const s of design.subject) summaries[design.subjectGroup[s]!]!.observations++;
	return summaries;
}

function components(subject: IntervalEstimate | null, residual: IntervalEstimate) {
	const one = (name: VarianceComponent['name'], v: IntervalEstimate): VarianceComponent => ({
		name,
		...v,
		standardDeviation: Math.sqrt(v.estimate)
	});
	return [...(subject ? [one('subject', subject)] : []), one('residual', residual)];
}

/**
 * A growth model from rows to everything a screen or a report shows, as plain data that JSON can hold.
 *
 * outcome = intercept + slope · time (+ group, group × time, covariates) + the subject's lasting offset + residual,
 * by REML unless said otherwise; see `fitMixed`, `precisionRule`, `subjectEffects` for formulae and sources.
 * Units: coefficients and lines in outcome units, slopes per time unit, variances in outcome units squared.
 * Errors: a `StatsError` whose code is one of `statsErrorCodes` and whose message is a sentence to show.
 */
export function analyseGrowth(
	rows: readonly GrowthRow[],
	spec: GrowthSpec,
	options: GrowthOptions = {}
): GrowthResult {
	const settled = settle(options);
	const { confidence } = settled;
	const checkpoint = (fraction: number) => {
		if (settled.shouldStop?.()) throw new StatsError('stopped', 'The analysis was stopped.');
		settled.onProgress?.(fraction);
	};
	checkpoint(0);
	const design = buildDesign(rows, spec);
	checkpoint(0.1);
	const fit = fitMixed(design, {
		method: settled.method,
		randomIntercept: settled.randomIntercept,
		shouldStop: settled.shouldStop,
		onProgress: (fraction) => settled.onProgress?.(0.1 + 0.4 * fraction)
	});
	checkpoint(0.5);
	const rule = precisionRule(fit, settled.degreesOfFreedom);
	const model = describe(design, settled);
	const differenceTimes = settled.differenceTimes ?? [model.timeRange.to];
	const unit = (j: number) => design.names.map((_, i) => (i === j ? 1 : 0));
	const intervals = varianceIntervals(fit, confidence);
	checkpoint(0.8);
	const effects = settled.randomIntercept ? subjectEffects(fit) : null;
	const residuals = residualPoints(fit, effects);
	const result: GrowthResult = {
		engineVersion: ENGINE_VERSION,
		model,
		counts: design.counts,
		groups: groupSummaries(design),
		coefficients: design.names.map((name, j) => ({
			name,
			...testContrast(fit, rule, unit(j), confidence)
		})),
		covariance: covarianceOfCoefficients(fit.products.basis, rule.covariance),
		contrasts: contrastsOf(design, differenceTimes).map((contrast) => ({
			...contrast,
			...testContrast(fit, rule, contrast.weights, confidence)
		})),
		varianceComponents: components(intervals.subject, intervals.residual),
		icc: intervals.icc,
		effectiveSampleSize: effectiveSampleSize(fit),
		logLikelihood: fit.logLikelihood,
		minusTwoLogLikelihood: -2 * fit.logLikelihood,
		criteria: fit.criteria,
		fittedLines: fittedLines(fit, rule, confidence, settled.lineTimes),
		trajectories: trajectories(design, residuals, effects),
		residuals,
		converged: fit.converged,
		gradient: fit.gradient,
		iterations: fit.iterations,
		boundary: fit.boundary,
		notes: notesOf(fit, model, [
			...(design.groups.length > 0 ? differenceTimes : []),
			...(settled.lineTimes ?? [])
		])
	};
	checkpoint(1);
	return result;
}
