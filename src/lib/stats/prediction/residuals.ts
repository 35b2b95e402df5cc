import type { Fit } from '../fit/fit-mixed.js';
import type { ResidualPoint, SubjectEffect } from '../types.js';

/** y − Xβ for each used row; outcome unit. */
export function marginalResiduals(fit: Fit): Float64Array {
	const { n, p } = fit.design;
	const { q } = fit.products.basis;
	const residuals = fit.products.residual.slice();
	for (let j = 0; j < p; j++) {
		const delta = fit.at.contrast[j]!;
		for (let i = 0; i < n; i++) residuals[i]! += delta * q[j * n + i]!;
	}
	return residuals;
}

/**
 * Fitted values and residuals of each used row, in the order handed in; outcome unit.
 *
 * Marginal: y − Xβ. Conditional: y − Xβ − offset of the subject; the same without a lasting offset.
 */
export function residualPoints(
	fit: Fit,
	effects: readonly SubjectEffect[] | null
): ResidualPoint[] {
	const { design } = fit;
	return Array.from(marginalResiduals(fit), (marginal, i) => {
		const subject = design.subject[i]!;
		const conditional = marginal - (effects?.[subject]?.offset ?? 0);
		const y = design.y[i]!;
		return {
			subject,
			time: design.time[i]!,
			fitted: y - conditional,
			marginalFitted: y - marginal,
			conditional,
			marginal
		};
	});
}
