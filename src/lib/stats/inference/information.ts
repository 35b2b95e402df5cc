import { Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import type { Curvature } from '../fit/curvature.js';
import { meanPart } from '../fit/weighted.js';
import { factorise, form, times, traceOfProduct } from '../numeric/symmetric.js';
import type { Method } from '../types.js';

function invert(information: Matrix): Matrix {
	const factored = factorise(information);
	if (!factored) {
		throw new StatsError(
			'singular-information',
			'The data hold no separate information on each variance, so degrees of freedom cannot be computed.'
		);
	}
	return factored.inverse;
}

function fill(size: number, entry: (k: number, l: number) => number): Matrix {
	const m = new Matrix(size, size);
	for (let k = 0; k < size; k++)
		for (let l = 0; l <= k; l++) {
			const v = entry(k, l);
			m.set(k, l, v);
			m.set(l, k, v);
		}
	return m;
}

/** tr(P V_k P V_l), with P the projected V⁻¹: what REML has in place of tr(V⁻¹ V_k V⁻¹ V_l). */
function projectedTrace(c: Curvature, k: number, l: number): number {
	const phi = c.covariance;
	const pk = phi.mmul(meanPart(c.first[k]!));
	const pl = phi.mmul(meanPart(c.first[l]!));
	return (
		c.traces[k]![l]! - 2 * traceOfProduct(phi, meanPart(c.second[k]![l]!)) + traceOfProduct(pk, pl)
	);
}

/**
 * W: the inverse expected information of the variance parameters under REML; outcome unit to the fourth.
 *
 * I_kl = ½ [tr(V⁻¹V_kV⁻¹V_l) − 2 tr(ΦQ_kl) + tr(ΦP_kΦP_l)]. Errors: `singular-information`.
 * Source: Kenward & Roger (1997), Biometrics 53:983-997, equation for the information in section 2.
 */
export function expectedCovariance(c: Curvature): Matrix {
	return invert(fill(c.parameters.length, (k, l) => projectedTrace(c, k, l) / 2));
}

/**
 * A: the inverse observed information of the variance parameters; outcome unit to the fourth.
 *
 * I_kl = y'PV_kPV_lPy − ½ tr(PV_kPV_l) under REML, with tr(V⁻¹V_kV⁻¹V_l) for the trace under ML.
 * Errors: `singular-information`.
 * Source: Harville (1977), JASA 72:320-338; Lindstrom & Bates (1988), JASA 83:1014-1022.
 */
export function observedCovariance(c: Curvature, method: Method): Matrix {
	const p = c.covariance.rows;
	const slopes = c.first.map((pk) => times(pk, c.contrast).slice(0, p));
	return invert(
		fill(c.parameters.length, (k, l) => {
			const quadratic =
				form(c.contrast, c.second[k]![l]!) - form(slopes[k]!, c.covariance, slopes[l]!);
			const trace = method === 'REML' ? projectedTrace(c, k, l) : c.traces[k]![l]!;
			return quadratic - trace / 2;
		})
	);
}
