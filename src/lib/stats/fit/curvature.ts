import type { Matrix } from 'ml-matrix';
import type { CrossProducts } from './cross-products.js';
import type { AtRatio } from './objective.js';
import { sumOverSubjects, weighted } from './weighted.js';

export type VarianceParameter = 'subject' | 'residual';

/**
 * How the likelihood and the precision of the mean bend with each variance parameter, at one point.
 *
 * All matrices are in the coordinates of the orthonormal basis Q, so X stands for Q here; V_k is the derivative
 * of V in parameter k. The inference reads nothing else, so that another dependence only has to fill this in.
 */
export interface Curvature {
	/** The parameters that are not on their boundary, in this order everywhere below. */
	parameters: VarianceParameter[];
	/** Φ = (X'V⁻¹X)⁻¹, p × p; outcome unit squared. */
	covariance: Matrix;
	/** [−δ, 1]: turns [X r] into the generalised least-squares residual. */
	contrast: number[];
	/** P_k = −[X r]'V⁻¹ V_k V⁻¹[X r], (p + 1) × (p + 1). */
	first: Matrix[];
	/** Q_kl = [X r]'V⁻¹ V_k V⁻¹ V_l V⁻¹[X r], (p + 1) × (p + 1). */
	second: Matrix[][];
	/** tr(V⁻¹ V_k V⁻¹ V_l). */
	traces: number[][];
}

/**
 * Curvature of the lasting-offset model, V_i = τ² J + σ² I, from its cross-products; O(p²) for each size met.
 *
 * With d = σ² + mτ² for a subject seen m times: V⁻¹JV⁻¹ = J/d², V⁻¹V⁻¹ = (I − J/m)/σ⁴ + (J/m)/d², and so on.
 * `residualVariance` is σ², outcome unit squared; with `boundary` τ² is held at zero and is no parameter.
 * Notation: Kenward & Roger (1997), Biometrics 53:983-997, section 2.
 */
export function curvatureOf(
	products: CrossProducts,
	at: AtRatio,
	residualVariance: number,
	withSubject: boolean
): Curvature {
	const s = residualVariance;
	const d = (size: number) => s * (1 + size * at.ratio);
	const parameters: VarianceParameter[] = withSubject ? ['subject', 'residual'] : ['residual'];
	// Power of the within-subject part (zero for J, which has none) and of the size in the between-subject part.
	const withinOf = (k: VarianceParameter) => (k === 'residual' ? 1 : 0);
	const sizeOf = (k: VarianceParameter, size: number) => (k === 'subject' ? size : 1);
	return {
		parameters,
		covariance: at.inverse.clone().mul(s),
		contrast: at.contrast,
		first: parameters.map((k) =>
			weighted(products, -withinOf(k) / s ** 2, (c) => -sizeOf(k, c.size) / d(c.size) ** 2)
		),
		second: parameters.map((k) =>
			parameters.map((l) =>
				weighted(
					products,
					(withinOf(k) * withinOf(l)) / s ** 3,
					(c) => (sizeOf(k, c.size) * sizeOf(l, c.size)) / d(c.size) ** 3
				)
			)
		),
		traces: parameters.map((k) =>
			parameters.map((l) =>
				sumOverSubjects(
					products,
					(c) =>
						(withinOf(k) * withinOf(l) * (c.size - 1)) / s ** 2 +
						(sizeOf(k, c.size) * sizeOf(l, c.size)) / d(c.size) ** 2
				)
			)
		)
	};
}
