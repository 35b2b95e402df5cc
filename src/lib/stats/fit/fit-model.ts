import { naturalModel, type NaturalModel, type NaturalParameter } from '../dependence/natural.js';
import { refuseUnidentifiedModel, refuseWithoutVariation } from '../dependence/identification.js';
import { refuseSaturated } from '../dependence/saturation.js';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import { toCoefficients } from '../numeric/orthonormal.js';
import type { Dependence, FitMethod } from '../plan.js';
import { profileAt } from './objective-of.js';
import { prepareModel, type PreparedModel } from './prepare-model.js';
import { searchModel, type SearchOptions } from './search-model.js';

/** Information criteria; `parameters` counts coefficients and every parameter of the covariance. */
export interface Criteria {
	parameters: number;
	aic: number;
	/** −2 log-likelihood + k log n, n the rows. */
	bicRows: number;
	/** … with rows − coefficients. */
	bicRowsMinusCoefficients: number;
	/** … with subjects. */
	bicSubjects: number;
}

/**
 * A fitted model: plain numbers, except `prepared` and `natural`, which hold functions and do not survive JSON.
 */
export interface ModelFit {
	prepared: PreparedModel;
	natural: NaturalModel;
	method: FitMethod;
	dependence: Dependence;
	/** Working parameters at the optimum: what a refit to like data may start from. */
	working: number[];
	/** σ² by which the working parameters are scaled: the error variance of the first class; outcome unit squared. */
	scale: number;
	/** Coordinates of the fitted mean in the orthonormal basis. */
	coordinates: number[];
	/** (Q'V⁻¹Q)⁻¹, p × p row-major; outcome unit squared. */
	coordinateCovariance: Float64Array;
	beta: number[];
	/** Standard errors of (X'V⁻¹X)⁻¹, without any small-sample adjustment. */
	se: number[];
	vcov: number[][];
	/** Every parameter of the covariance by name, on the data's own scale; φ = exp(−1/range) where it is `range`. */
	parameters: NaturalParameter[];
	logLikelihood: number;
	criteria: Criteria;
	converged: boolean;
	/** √(g'Bg): slope of −2 log-likelihood at the end, in standard deviations of the parameters; 0 is flat. */
	gradient: number;
	/** Evaluations of the likelihood on all the data. */
	evaluations: number;
	/** Components at the edge of their space, by name. */
	boundary: string[];
	/** Whole sentences. */
	warnings: string[];
}

export interface ModelFitOptions extends SearchOptions {
	method: FitMethod;
}

const edgeSentence: Record<string, string> = {
	'subject level':
		'The variance of the subjects’ levels is estimated as zero: beyond the rest of the model, subjects do not differ lastingly in level.',
	'subject slope':
		'The variance of the subjects’ slopes is estimated as zero: beyond the rest of the model, subjects do not differ in slope.',
	'level–slope correlation':
		'Level and slope of the subjects are estimated as perfectly correlated; degrees of freedom treat the three variances as if they were inside their range.',
	visit: 'The variance of the shared visit effects is estimated as zero.',
	range:
		'The serial correlation is estimated to vanish between neighbouring occasions, so that the errors are as good as independent.',
	'range without end':
		'The serial part is estimated not to fade over the whole follow-up, so that it cannot be told from a lasting level.',
	noise: 'The variance of the measurement noise is estimated as zero.',
	serial: 'The serial part is estimated as zero: what is left over is noise alone.'
};

/**
 * Turns an optimum, or any other point of the working parameters, into what people read.
 * Errors: `out-of-range`.
 */
export function summariseAt(
	prepared: PreparedModel,
	method: FitMethod,
	x: Float64Array,
	state: Pick<ModelFit, 'converged' | 'gradient' | 'evaluations' | 'boundary'>
): ModelFit {
	const { design, basis, leastSquares, layout } = prepared;
	const { n, p } = design;
	const profile = profileAt(prepared, method, x);
	const refuse = () => {
		throw new StatsError(
			'out-of-range',
			'The estimates are too large or too small to be held. Put the outcome and the covariates in units nearer to 1.'
		);
	};
	if (!profile) return refuse();
	const { scale, covariance, contrast, deviance } = profile;
	const coordinates = leastSquares.map((c, i) => c - contrast[i]!);
	const beta = toCoefficients(basis, coordinates);
	const rows = Array.from({ length: p }, (_, i) =>
		toCoefficients(basis, covariance.slice(i * p, (i + 1) * p))
	);
	const turned = Array.from({ length: p }, (_, j) =>
		toCoefficients(
			basis,
			rows.map((row) => row[j]!)
		)
	);
	const vcov = turned.map((row, i) => row.map((v, j) => (scale * (v + turned[j]![i]!)) / 2));
	const natural = naturalModel(design, layout, x, scale, state.boundary);
	const subjects = design.subjectStart.length - 1;
	const k = p + natural.parameters.length;
	const warnings = state.boundary.map((name) =>
		name === 'level–slope correlation' || name === 'range without end'
			? edgeSentence[name]!
			: `${edgeSentence[name]} Degrees of freedom are those of the model without it.`
	);
	if (!state.converged)
		warnings.push(
			layout.shape >= 0
				? 'The search did not come to rest. So many covariances may be too many for so few subjects; do not rely on these numbers, and try a structure with fewer parameters.'
				: 'The search did not come to rest; do not rely on these numbers.'
		);
	const fit: ModelFit = {
		prepared,
		natural,
		method,
		dependence: prepared.dependence,
		working: [...x],
		scale,
		coordinates,
		coordinateCovariance: covariance.map((v) => v * scale),
		beta,
		se: vcov.map((row, i) => Math.sqrt(row[i]!)),
		vcov,
		parameters: natural.parameters,
		logLikelihood: -deviance / 2,
		criteria: {
			parameters: k,
			aic: deviance + 2 * k,
			bicRows: deviance + k * Math.log(n),
			bicRowsMinusCoefficients: deviance + k * Math.log(Math.max(1, n - p)),
			bicSubjects: deviance + k * Math.log(subjects)
		},
		...state,
		gradient: Math.min(state.gradient, Number.MAX_VALUE),
		warnings
	};
	const numbers = [...beta, ...fit.se, ...vcov.flat(), ...fit.parameters.map((v) => v.value)];
	if (!numbers.every(Number.isFinite)) return refuse();
	return fit;
}

/**
 * Fits what `prepareModel` made ready: β, σ² and visit effects profiled out, the rest searched.
 *
 * AIC and BIC count coefficients and every parameter of the covariance, those at an edge included.
 * Errors: `stopped`, `out-of-range`, `perfect-fit`, `constant-outcome`, `no-residual-variation`.
 */
export function fitPrepared(prepared: PreparedModel, options: ModelFitOptions): ModelFit {
	refuseWithoutVariation(prepared);
	const found = searchModel(prepared, options.method, options);
	return summariseAt(prepared, options.method, found.x, found);
}

/**
 * Fits y = Xβ + Zb + v + e by REML or ML for any dependence of a plan.
 *
 * Errors: those of `refuseUnidentifiedModel` and `refuseSaturated` besides those of `fitPrepared`.
 * Source: Laird & Ware (1982), Biometrics 38:963-974; Jennrich & Schluchter (1986), Biometrics 42:805-820.
 */
export function fitModel(
	design: ModelDesign,
	dependence: Dependence,
	options: ModelFitOptions
): ModelFit {
	refuseUnidentifiedModel(design, dependence);
	const prepared = prepareModel(design, dependence);
	refuseWithoutVariation(prepared);
	refuseSaturated(prepared);
	return fitPrepared(prepared, options);
}
