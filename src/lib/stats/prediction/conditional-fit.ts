import { subjectCovariance } from '../dependence/layout.js';
import type { ModelFit } from '../fit/fit-model.js';
import { inverseCovariance, type InverseCovariance } from './inverse-covariance.js';
import { subjectEffects, type SubjectEffects } from './subject-effects.js';

/** Fitted values and residuals of the design's rows, in their order; analysed scale, each n long. */
export interface FittedRows {
	/** Xβ. */
	marginalFitted: Float64Array;
	/** Xβ + Zb + v: with the subject's own level and slope and the visit's shared effect. */
	fitted: Float64Array;
	/** y − Xβ. */
	marginal: Float64Array;
	/** y − Xβ − Zb − v; a serial part stays in it. */
	conditional: Float64Array;
	/** Null when the model has no subject effects. */
	effects: SubjectEffects[] | null;
}

/** The fitted values and residuals of a fit, with the subject effects they rest on. Errors: `singular-information`. */
export function fittedRows(
	fit: ModelFit,
	inverse: InverseCovariance = inverseCovariance(fit)
): FittedRows {
	const { design, layout, rows } = fit.prepared;
	const { q } = layout;
	const effects = q > 0 ? subjectEffects(fit, inverse) : null;
	const conditional = inverse.residual.slice();
	const g = subjectCovariance(layout, Float64Array.from(fit.working));
	for (let s = 0; s < design.subjects.length; s++) {
		// On the inner time: from a far origin, level at time 0 and slope would cancel and lose digits.
		const b = new Float64Array(q);
		const [from, to] = [design.subjectStart[s]!, design.subjectStart[s + 1]!];
		for (let i = from; i < to; i++)
			for (let a = 0; a < q; a++)
				for (let c = 0; c < q; c++)
					b[a]! += fit.scale * g[a * q + c]! * rows.z[i * q + c]! * inverse.weighted[i]!;
		for (let i = from; i < to; i++) {
			for (let a = 0; a < q; a++) conditional[i]! -= rows.z[i * q + a]! * b[a]!;
			conditional[i]! -= inverse.visits?.effects[design.visit[i]!] ?? 0;
		}
	}
	const y = fit.prepared.y;
	return {
		marginalFitted: y.map((v, i) => v - inverse.residual[i]!),
		fitted: y.map((v, i) => v - conditional[i]!),
		marginal: inverse.residual,
		conditional,
		effects
	};
}
