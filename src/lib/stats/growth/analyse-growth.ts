import { effectiveSizes } from '../analysis/effective-sizes.js';
import { buildModelDesign, type BuiltDesign } from '../design/build-model-design.js';
import { averageCovariates } from '../design/mean-rows.js';
import { ENGINE_VERSION } from '../engine.js';
import { StatsError } from '../errors.js';
import { fitModel } from '../fit/fit-model.js';
import { precisionOf } from '../inference/precision.js';
import { fittedRows } from '../prediction/conditional-fit.js';
import { meanLines, timeRanges } from '../prediction/lines.js';
import type {
	Counts,
	FittedLine,
	GrowthOptions,
	GrowthResult,
	GrowthRow,
	GrowthSpec,
	ModelDescription
} from '../types.js';
import { contrastsOf } from './contrasts.js';
import { groupSummaries, residualPoints, trajectories } from './drawn.js';
import { growthName } from './names.js';
import { notesOf } from './notes.js';
import { settle, type SettledOptions } from './options.js';
import { rowsToColumns } from './rows-to-columns.js';
import { variancesOf } from './variances.js';

/** Coefficient names of the growth model. Errors: `rank-deficient`: its result has no place for a column left out. */
function namesOf({ columns, parts }: BuiltDesign): string[] {
	const names = columns.terms.map((term) => growthName(term, parts));
	const [alias] = columns.aliased;
	if (!alias) return names;
	const column = names[alias.column]!;
	const by = alias.of.map((o) => names[o.column]!);
	throw new StatsError(
		'rank-deficient',
		by.length === 0
			? `The column “${column}” is zero in every usable row, so its coefficient cannot be estimated.`
			: `The column “${column}” is determined by ${by.map((name) => `“${name}”`).join(', ')} in the usable rows, so its coefficient cannot be estimated.`,
		{ column, determinedBy: by }
	);
}

function describe(built: BuiltDesign, names: string[], options: SettledOptions): ModelDescription {
	const { parts, columns } = built;
	const ranges = timeRanges(built);
	const average = averageCovariates(built);
	return {
		method: options.method,
		randomIntercept: options.randomIntercept,
		degreesOfFreedom: options.degreesOfFreedom,
		confidence: options.confidence,
		terms: names,
		groupLevels: parts.groups,
		groupByTime: parts.timeByGroup.length > 0,
		covariates: parts.covariates.map(({ name, kind, levels }) => ({
			name,
			kind: kind === 'categorical' ? kind : 'numeric',
			levels
		})),
		linesAt: columns.terms.flatMap((term, column) =>
			term.kind === 'numeric' || term.kind === 'category'
				? [{ name: names[column]!, value: average(term, column) }]
				: []
		),
		timeRange: {
			from: Math.min(...ranges.map((r) => r.from)),
			to: Math.max(...ranges.map((r) => r.to))
		}
	};
}

function countsOf({ counts }: BuiltDesign): Counts {
	const { baselineRows: _, ...own } = counts;
	return own;
}

/** `a` as it is told, from `from` to `to` of the whole. */
const part = (tell: GrowthOptions['onProgress'], from: number, to: number) => (a: number) =>
	tell?.(from + (to - from) * a);

/**
 * A growth model from rows to everything a screen or a report shows, as plain data that JSON can hold.
 *
 * outcome = intercept + slope · time (+ group, group × time, covariates) + the subject's lasting offset + residual,
 * by REML unless said otherwise; see `fitModel`, `precisionOf`, `subjectEffects` for formulae and sources. The effective
 * sample size for the mean is Σ n_i / (1 + (n_i − 1) ICC), see `effectiveSizes`.
 * Units: coefficients and lines in outcome units, slopes per time unit, variances in outcome units squared.
 * Errors: a `StatsError` whose code is one of `statsErrorCodes` and whose message is a sentence to show.
 */
export function analyseGrowth(
	rows: readonly GrowthRow[],
	spec: GrowthSpec,
	options: GrowthOptions = {}
): GrowthResult {
	const settled = settle(options);
	const { confidence, onProgress } = settled;
	const supervision = settled.shouldStop ? { shouldStop: settled.shouldStop } : {};
	const checkpoint = (fraction: number) => {
		if (settled.shouldStop?.()) throw new StatsError('stopped', 'The analysis was stopped.');
		onProgress?.(fraction);
	};
	checkpoint(0);
	const { columns, plan, groupLevels } = rowsToColumns(rows, spec, settled);
	const built = buildModelDesign(columns, plan, groupLevels ? { groupLevels } : {});
	const { design } = built;
	const names = namesOf(built);
	checkpoint(0.1);
	const fit = fitModel(design, plan, {
		method: plan.method,
		...supervision,
		onProgress: part(onProgress, 0.1, 0.5)
	});
	checkpoint(0.5);
	const precision = precisionOf(fit, settled.degreesOfFreedom);
	const model = describe(built, names, settled);
	const differenceTimes = settled.differenceTimes ?? [model.timeRange.to];
	const variances = variancesOf(fit, confidence, {
		...supervision,
		onProgress: part(onProgress, 0.5, 0.8)
	});
	checkpoint(0.8);
	const drawn = fittedRows(fit);
	const { mean } = effectiveSizes(fit);
	const boundary = fit.boundary.length > 0;
	// At the edge the rows count in full, and say so without the last bits of a quotient.
	const forMean = boundary || !settled.randomIntercept ? design.n : mean;
	const result: GrowthResult = {
		engineVersion: ENGINE_VERSION,
		model,
		counts: countsOf(built),
		groups: groupSummaries(built),
		coefficients: names.map((name, j) => ({
			name,
			...precision.test(
				names.map((_, i) => (i === j ? 1 : 0)),
				confidence
			)
		})),
		covariance: precision.covariance,
		contrasts: contrastsOf(built, differenceTimes).map((contrast) => ({
			...contrast,
			...precision.test(contrast.weights, confidence)
		})),
		varianceComponents: variances.components,
		icc: variances.icc,
		effectiveSampleSize: { forMean, designEffect: design.n / forMean },
		logLikelihood: fit.logLikelihood,
		minusTwoLogLikelihood: -2 * fit.logLikelihood,
		criteria: fit.criteria,
		fittedLines: meanLines(built, precision, confidence, settled.lineTimes).map(
			({ group, points }): FittedLine => ({
				group,
				points: points.map(({ time, estimate, lower, upper }) => ({
					time: time!,
					estimate,
					lower,
					upper
				}))
			})
		),
		trajectories: trajectories(built, drawn),
		residuals: residualPoints(built, drawn),
		converged: fit.converged,
		gradient: fit.gradient + 0,
		iterations: fit.evaluations,
		boundary,
		notes: notesOf(model, built.counts, fit, [
			...(design.groups.length > 0 ? differenceTimes : []),
			...(settled.lineTimes ?? [])
		])
	};
	checkpoint(1);
	return result;
}
