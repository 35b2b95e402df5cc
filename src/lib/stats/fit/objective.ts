import type { Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import { factorise, form, times, traceOfProduct } from '../numeric/symmetric.js';
import type { Method } from '../types.js';
import type { CrossProducts } from './cross-products.js';
import { meanPart, sumOverSubjects, weighted } from './weighted.js';

/** The parts of −2 log-likelihood that depend on the variance ratio λ only. */
export interface AtRatio {
	ratio: number;
	/** (p × p) inverse of S = σ² Q'V⁻¹Q. */
	inverse: Matrix;
	/** [−δ, 1], p + 1 long: δ is what generalised least squares adds to the least-squares coordinates. */
	contrast: number[];
	/** r'V⁻¹r σ² at those coordinates; outcome unit squared. */
	weightedSquares: number;
	/** log|I + λJ| over all subjects, and under REML log|X'V⁻¹X| + p log σ² besides. */
	logDeterminants: number;
	/** n under ML, n − p under REML. */
	weight: number;
}

/** The likelihood's parts at the variance ratio `ratio` = subject variance / residual variance ≥ 0; unitless. */
export function atRatio(products: CrossProducts, method: Method, ratio: number): AtRatio {
	const { p } = products;
	const s = weighted(products, 1, (c) => 1 / (1 + c.size * ratio));
	const factored = factorise(meanPart(s));
	if (!factored) {
		throw new StatsError(
			'out-of-range',
			'The columns of the mean cannot be told apart at this ratio of variances.',
			{ ratio }
		);
	}
	const delta = times(
		factored.inverse,
		Array.from({ length: p }, (_, i) => s.get(i, p))
	);
	const contrast = [...delta.map((d) => -d), 1];
	const ofV = sumOverSubjects(products, (c) => Math.log1p(c.size * ratio));
	const ofX = factored.logDeterminant + products.logDeterminantOfX;
	return {
		ratio,
		inverse: factored.inverse,
		contrast,
		weightedSquares: form(contrast, s),
		logDeterminants: method === 'REML' ? ofV + ofX : ofV,
		weight: method === 'REML' ? products.n - p : products.n
	};
}

/**
 * −2 log-likelihood at a ratio and a residual variance (outcome unit squared); unitless up to the units of X and y.
 *
 * ML: n log 2π + log|V| + r'V⁻¹r. REML: (n − p) log 2π + log|V| + log|X'V⁻¹X| + r'V⁻¹r, with no log|X'X| term.
 * Source: Harville (1974), Biometrika 61:383-385; Laird & Ware (1982), Biometrics 38:963-974.
 */
export function deviance(at: AtRatio, residualVariance: number): number {
	return (
		at.weight * Math.log(2 * Math.PI * residualVariance) +
		at.logDeterminants +
		at.weightedSquares / residualVariance
	);
}

/** The residual variance that is best for the ratio: weighted squares ÷ (n − p) under REML, ÷ n under ML. */
export function bestResidualVariance(at: AtRatio): number {
	return at.weightedSquares / at.weight;
}

/** −2 log-likelihood with the coefficients and the residual variance at their best for the ratio. */
export function profileDeviance(at: AtRatio): number {
	return deviance(at, bestResidualVariance(at));
}

/**
 * First and second derivative of the profile deviance in the ratio.
 *
 * With S' = −Σ m w² B and S'' = Σ 2m² w³ B, w = 1/(1 + mλ), v = [−δ, 1]:
 * first = weight · v'S'v / v'Sv + Σ m w + tr(S⁻¹S'), the trace under REML only.
 * Source: differentiation of the above; Lindstrom & Bates (1988), JASA 83:1014-1022, for the general model.
 */
export function profileSlope(
	products: CrossProducts,
	method: Method,
	at: AtRatio
): { first: number; second: number } {
	const { p } = products;
	const w = (size: number) => 1 / (1 + size * at.ratio);
	const s1 = weighted(products, 0, (c) => -c.size * w(c.size) ** 2);
	const s2 = weighted(products, 0, (c) => 2 * c.size ** 2 * w(c.size) ** 3);
	const s1v = times(s1, at.contrast).slice(0, p);
	const rss = at.weightedSquares;
	const rss1 = form(at.contrast, s1);
	const rss2 = form(at.contrast, s2) - 2 * form(s1v, at.inverse);
	let first = (at.weight * rss1) / rss + sumOverSubjects(products, (c) => c.size * w(c.size));
	let second =
		at.weight * (rss2 / rss - (rss1 / rss) ** 2) -
		sumOverSubjects(products, (c) => (c.size * w(c.size)) ** 2);
	if (method === 'REML') {
		const inverseS1 = at.inverse.mmul(meanPart(s1));
		first += inverseS1.trace();
		second += traceOfProduct(at.inverse, meanPart(s2)) - traceOfProduct(inverseS1, inverseS1);
	}
	return { first, second };
}
