import type { Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import type { Curvature } from '../fit/curvature.js';
import type { Fit } from '../fit/fit-mixed.js';
import { meanPart } from '../fit/weighted.js';
import { form, symmetric, times } from '../numeric/symmetric.js';
import type { DegreesOfFreedom } from '../types.js';
import { expectedCovariance, observedCovariance } from './information.js';

/** How precise a row of weights on the basis coordinates is. */
export interface Precision {
	/** Square of the standard error; outcome unit squared for weights on outcomes. */
	variance: number;
	df: number;
}

/** What is computed once for a fit and then asked for each contrast. */
export interface PrecisionRule {
	kind: DegreesOfFreedom;
	/** Covariance of the basis coordinates behind the standard errors, p × p. */
	covariance: Matrix;
	/** `weights`: p long, on the basis coordinates. */
	of(weights: readonly number[]): Precision;
}

/** −∂(l'Φl)/∂θ_k = l'ΦP_kΦl for each variance parameter k. */
function slopesOfVariance(c: Curvature, weights: readonly number[]): number[] {
	const phiL = times(c.covariance, weights);
	return c.first.map((pk) => form(phiL, meanPart(pk)));
}

/** 2 (l'Φl)² / (g'Ag): what both methods come to for a single row, with A their own covariance of the variances. */
function singleRowDf(c: Curvature, a: Matrix, weights: readonly number[]): number {
	const variance = form(weights, c.covariance);
	return (2 * variance ** 2) / form(slopesOfVariance(c, weights), a);
}

/**
 * Φ_A: the covariance adjusted for the variances being estimated; outcome unit squared.
 *
 * Φ_A = Φ + 2Φ { Σ_kl W_kl (Q_kl − P_kΦP_l) } Φ. The term in second derivatives of V is absent because V is
 * linear in its variances here. Source: Kenward & Roger (1997), Biometrics 53:983-997, equation (7) of section 2.2.
 */
export function adjustedCovariance(c: Curvature, w: Matrix): Matrix {
	const phi = c.covariance;
	let middle = phi.clone().mul(0);
	c.parameters.forEach((_, k) =>
		c.parameters.forEach((__, l) => {
			const pk = meanPart(c.first[k]!);
			const pl = meanPart(c.first[l]!);
			const term = meanPart(c.second[k]![l]!).sub(pk.mmul(phi).mmul(pl));
			middle = middle.add(term.mul(w.get(k, l)));
		})
	);
	return symmetric(phi.clone().add(phi.mmul(middle).mmul(phi).mul(2)));
}

/**
 * The rule by which standard errors and degrees of freedom of this fit are made.
 *
 * - `kenward-roger`: adjusted covariance; for one row the scale of F is 1 and df = 2 (l'Φl)² / (g'Wg), W the inverse
 *   expected information. REML only. Source: Kenward & Roger (1997), Biometrics 53:983-997, sections 2-3.
 * - `satterthwaite`: unadjusted; df = 2 (l'Φl)² / (g'Ag), A the inverse observed information, under REML or ML.
 *   Source: Giesbrecht & Burns (1985), Biometrics 41:477-486; Fai & Cornelius (1996), J Stat Comput Simul 54:363-378.
 * - `naive`: unadjusted; rows − coefficients, as if rows were independent.
 * With the subject variance at zero the first two are those of the model without a lasting offset.
 * Errors: `kenward-roger-needs-reml`, `singular-information`.
 */
export function precisionRule(fit: Fit, kind: DegreesOfFreedom): PrecisionRule {
	const c = fit.curvature;
	const plain = (df: (weights: readonly number[]) => number): PrecisionRule => ({
		kind,
		covariance: c.covariance,
		of: (weights) => ({ variance: form(weights, c.covariance), df: df(weights) })
	});
	if (kind === 'naive') return plain(() => fit.products.n - fit.products.p);
	if (kind === 'satterthwaite') {
		const a = observedCovariance(c, fit.method);
		return plain((weights) => singleRowDf(c, a, weights));
	}
	if (fit.method !== 'REML') {
		throw new StatsError(
			'kenward-roger-needs-reml',
			'Kenward–Roger degrees of freedom are defined for REML only. Fit by REML, or use Satterthwaite.'
		);
	}
	const w = expectedCovariance(c);
	const adjusted = adjustedCovariance(c, w);
	return {
		kind,
		covariance: adjusted,
		of: (weights) => ({ variance: form(weights, adjusted), df: singleRowDf(c, w, weights) })
	};
}
