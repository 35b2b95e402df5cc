import type { Design } from '../design/design.js';
import { StatsError } from '../errors.js';
import { covarianceOfCoefficients, toCoefficients } from '../numeric/orthonormal.js';
import type { InformationCriteria, Method, Supervision } from '../types.js';
import { crossProducts, type CrossProducts } from './cross-products.js';
import { curvatureOf, type Curvature } from './curvature.js';
import { refuseUnidentified } from './identification.js';
import { atRatio, bestResidualVariance, deviance, type AtRatio } from './objective.js';
import { searchRatio, type Search } from './search.js';

export interface FitOptions extends Supervision {
	method: Method;
	randomIntercept: boolean;
}

/** A fitted model: its numbers, and what inference and prediction go on from. */
export interface Fit {
	design: Design;
	products: CrossProducts;
	at: AtRatio;
	curvature: Curvature;
	method: Method;
	randomIntercept: boolean;
	/** Coefficients in the basis Q; `beta` = R⁻¹ of these. Contrasts use them, being free of cancellation. */
	coordinates: number[];
	/** p long; outcome unit per unit of the column. */
	beta: number[];
	se: number[];
	/** (X'V⁻¹X)⁻¹, p × p, with no small-sample factor, for REML and ML alike. */
	vcov: number[][];
	/** Outcome unit squared; `subject` is null when the model has no lasting offset. */
	varianceComponents: { subject: number | null; residual: number };
	logLikelihood: number;
	criteria: InformationCriteria;
	converged: boolean;
	boundary: boolean;
	gradient: number;
	iterations: number;
}

/** −2l + 2k, −2l + k log n and its kin; k = coefficients + variance components, for REML and ML alike. */
export function informationCriteria(
	minusTwoLogLikelihood: number,
	k: number,
	n: number,
	p: number,
	subjects: number
): InformationCriteria {
	return {
		parameters: k,
		aic: minusTwoLogLikelihood + 2 * k,
		bicRows: minusTwoLogLikelihood + k * Math.log(n),
		bicRowsMinusCoefficients: minusTwoLogLikelihood + k * Math.log(n - p),
		bicSubjects: minusTwoLogLikelihood + k * Math.log(subjects)
	};
}

const independent = (products: CrossProducts, method: Method): Search => ({
	at: atRatio(products, method, 0),
	boundary: false,
	gradient: 0,
	converged: true,
	iterations: 1
});

/** The last stage: from the optimum to the numbers people read. Errors: `out-of-range`. */
export function summarise(
	design: Design,
	products: CrossProducts,
	search: Search,
	{ method, randomIntercept }: FitOptions
): Fit {
	const { at } = search;
	const { p, basis } = products;
	const residual = bestResidualVariance(at);
	const minusTwo = deviance(at, residual);
	const coordinates = products.leastSquares.map((c, i) => c - at.contrast[i]!);
	const curvature = curvatureOf(products, at, residual, randomIntercept && !search.boundary);
	const vcov = covarianceOfCoefficients(basis, curvature.covariance);
	const fit: Fit = {
		design,
		products,
		at,
		curvature,
		method,
		randomIntercept,
		coordinates,
		beta: toCoefficients(basis, coordinates),
		se: vcov.map((row, i) => Math.sqrt(row[i]!)),
		vcov,
		varianceComponents: { subject: randomIntercept ? at.ratio * residual : null, residual },
		logLikelihood: -minusTwo / 2,
		criteria: informationCriteria(
			minusTwo,
			p + (randomIntercept ? 2 : 1),
			products.n,
			p,
			products.subjects
		),
		converged: search.converged,
		boundary: search.boundary,
		gradient: search.gradient,
		iterations: search.iterations
	};
	const numbers = [...fit.beta, ...fit.se, ...fit.vcov.flat(), residual, minusTwo];
	if (!numbers.every(Number.isFinite) || residual <= 0) {
		throw new StatsError(
			'out-of-range',
			'The estimates are too large or too small to be held. Put the outcome and the covariates in units nearer to 1.'
		);
	}
	return fit;
}

/**
 * Fits y = Xβ + b_subject + e by REML or ML; without `randomIntercept`, y = Xβ + e.
 *
 * b ~ N(0, τ²) and e ~ N(0, σ²), all independent. β and σ² are profiled out, the ratio τ²/σ² ≥ 0 is searched;
 * after one O(n p²) pass over the rows the cost does not depend on n. AIC and BIC count coefficients and variances.
 * Errors: `rank-deficient`, `one-observation-per-subject`, `too-few-subjects`, `too-few-observations`,
 * `perfect-fit`, `no-residual-variation`, `out-of-range`, `stopped`.
 * Source: Laird & Ware (1982), Biometrics 38:963-974; Harville (1977), JASA 72:320-338.
 */
export function fitMixed(design: Design, options: FitOptions): Fit {
	const products = crossProducts(design);
	refuseUnidentified(design, products, options.randomIntercept);
	const search = options.randomIntercept
		? searchRatio(products, options.method, options)
		: independent(products, options.method);
	return summarise(design, products, search, options);
}
