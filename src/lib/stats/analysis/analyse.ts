import { buildModelDesign, type BuiltDesign } from '../design/build-model-design.js';
import type { Columns } from '../design/columns.js';
import { coefficientAt, combination, type Contrast } from '../design/contrasts.js';
import { ENGINE_VERSION } from '../engine.js';
import { StatsError } from '../errors.js';
import { fitModel, type ModelFit } from '../fit/fit-model.js';
import { precisionOf, type Precision } from '../inference/precision.js';
import type { AnalysisPlan } from '../plan.js';
import type { Supervision } from '../types.js';
import { componentsOf } from './components.js';
import { effectiveSizes } from './effective-sizes.js';
import type { AnalysisResult, Ratio, Tested } from './result.js';
import { warningsOf } from './warnings.js';

export interface AnalysisOptions extends Supervision {
	/** Whether to look for limits of the parts of the covariance; when they are at most ten unless said otherwise. */
	componentLimits?: boolean | undefined;
}

/** An analysis with what later questions go on from; only `result` survives JSON. */
export interface Analysis {
	built: BuiltDesign;
	fit: ModelFit;
	precision: Precision;
	result: AnalysisResult;
}

/** Errors: `out-of-range`. */
function ratioOf(name: string, { estimate, lower, upper }: Omit<Ratio, 'name'>): Ratio {
	const ratio = { estimate: Math.exp(estimate), lower: Math.exp(lower), upper: Math.exp(upper) };
	if (Object.values(ratio).every(Number.isFinite)) return ratio;
	throw new StatsError(
		'out-of-range',
		`“${name}” is ${estimate} on the log scale, with limits ${lower} and ${upper}: too large to be brought back as a ratio.`
	);
}

function tested(
	name: string,
	{ inside }: Contrast,
	precision: Precision,
	{ scale, confidence }: AnalysisPlan
): Tested {
	const { estimate, standardError, df, t, p, lower, upper } = precision.test(inside, confidence);
	const ratio = scale === 'log' ? ratioOf(name, { estimate, lower, upper }) : null;
	return { name, estimate, se: standardError, df, t, p, lower, upper, ratio };
}

/** T C T', the covariance of the coefficients on the data's own scale. */
function ownCovariance({ ownScale }: BuiltDesign, covariance: number[][]): number[][] {
	if (!ownScale) return covariance;
	const p = covariance.length;
	const t = (i: number, j: number) => ownScale.matrix[i * p + j]!;
	const half = covariance.map((_, i) =>
		covariance.map((_, j) => covariance.reduce((sum, row, k) => sum + t(i, k) * row[j]!, 0))
	);
	return half.map((row) =>
		covariance.map((_, j) => row.reduce((sum, v, k) => sum + v * t(j, k), 0))
	);
}

/** Progress of a part as progress of the whole. */
function within(supervision: Supervision, from: number, to: number): Supervision {
	return {
		...(supervision.shouldStop ? { shouldStop: supervision.shouldStop } : {}),
		onProgress: (fraction) => supervision.onProgress?.(from + (to - from) * fraction)
	};
}

/**
 * The analysis a plan asks for, with the design and the fit it rests on.
 *
 * Errors: those of `buildModelDesign`, of the fit and of its inference; `unknown-coefficient` and `not-estimable` for a
 * contrast; `stopped`.
 */
export function carryOut(
	columns: Columns,
	plan: AnalysisPlan,
	supervision: AnalysisOptions = {}
): Analysis {
	const checkpoint = (fraction: number) => {
		if (supervision.shouldStop?.()) throw new StatsError('stopped', 'The analysis was stopped.');
		supervision.onProgress?.(fraction);
	};
	checkpoint(0);
	const built = buildModelDesign(columns, plan);
	const asked = (plan.contrasts ?? []).map(({ name, weights }) => ({
		name,
		contrast: combination(built, weights, `The contrast “${name}”`)
	}));
	checkpoint(0.1);
	const { design, ownScale } = built;
	const { subjectEffects, visitEffects, errors } = plan;
	const fit = fitModel(
		design,
		{ subjectEffects, visitEffects, errors },
		{ method: plan.method, ...within(supervision, 0.1, 0.6) }
	);
	checkpoint(0.6);
	const precision = precisionOf(fit, plan.degreesOfFreedom);
	const sizes = effectiveSizes(fit);
	checkpoint(0.7);
	const { parts, icc, limits } = componentsOf(
		fit,
		plan.confidence ?? 0.95,
		supervision.componentLimits,
		within(supervision, 0.7, 1)
	);
	checkpoint(1);
	// A restricted likelihood depends on the scaling of X, and people compare it on the data's own.
	const shift = ownScale && plan.method === 'reml' ? ownScale.logDeterminant : 0;
	const { criteria } = fit;
	const result: AnalysisResult = {
		engine: ENGINE_VERSION,
		plan,
		coefficients: design.names.map((name, j) =>
			tested(name, coefficientAt(built, j), precision, plan)
		),
		covariance: ownCovariance(built, precision.covariance),
		contrasts: asked.map(({ name, contrast }) => ({
			...tested(name, contrast, precision, plan),
			weights: contrast.weights,
			effectiveSampleSize: sizes.of(contrast.inside)
		})),
		varianceComponents: parts,
		icc,
		effectiveSampleSize: { mean: sizes.mean },
		logLikelihood: fit.logLikelihood + shift,
		parameters: criteria.parameters,
		aic: criteria.aic - 2 * shift,
		bic: {
			rows: criteria.bicRows - 2 * shift,
			rowsLessCoefficients: criteria.bicRowsMinusCoefficients - 2 * shift,
			subjects: criteria.bicSubjects - 2 * shift
		},
		observations: design.n,
		subjects: design.subjects.length,
		dropped: built.dropped,
		aliased: design.aliased,
		boundary: fit.boundary,
		converged: fit.converged,
		gradientNorm: fit.gradient,
		warnings: warningsOf(built, fit, limits)
	};
	return { built, fit, precision, result };
}

/** The analysis a plan asks for, as plain data that JSON can hold; see `carryOut`. */
export function analyse(
	columns: Columns,
	plan: AnalysisPlan,
	options: AnalysisOptions = {}
): AnalysisResult {
	return carryOut(columns, plan, options).result;
}
