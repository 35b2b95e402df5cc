import { StatsError } from '../errors.js';
import type { Fit } from '../fit/fit-mixed.js';
import { form } from '../numeric/symmetric.js';
import type { SubjectEffect } from '../types.js';
import { marginalResiduals } from './residuals.js';

/**
 * Best linear unbiased prediction of each subject's lasting offset, in the order of `design.subjects`; outcome unit.
 *
 * For a subject seen m times, with shrinkage k = mλ/(1 + mλ): offset = k · mean marginal residual;
 * conditional variance τ²(1 − k), the coefficients taken as known; prediction variance adds h'Φh, h = k · mean of x.
 * On the boundary all three are 0, for the offset is then taken not to exist. Errors: `no-subject-effect`.
 * Source: Robinson (1991), Statistical Science 6:15-32; McCulloch & Searle (2001), chapter 9.
 */
export function subjectEffects(fit: Fit): SubjectEffect[] {
	const { design, products, at } = fit;
	const { subject: variance } = fit.varianceComponents;
	if (variance === null) {
		throw new StatsError('no-subject-effect', 'The model has no lasting offset to predict.');
	}
	const { n, p } = design;
	const sizes = new Int32Array(design.subjects.length);
	const residualSums = new Float64Array(design.subjects.length);
	const basisSums = new Float64Array(design.subjects.length * p);
	const residuals = marginalResiduals(fit);
	for (let i = 0; i < n; i++) {
		const s = design.subject[i]!;
		sizes[s]!++;
		residualSums[s]! += residuals[i]!;
		for (let j = 0; j < p; j++) basisSums[s * p + j]! += products.basis.q[j * n + i]!;
	}
	return Array.from(sizes, (m, s) => {
		const perVisit = at.ratio / (1 + m * at.ratio);
		const h = Array.from(basisSums.subarray(s * p, (s + 1) * p), (q) => q * perVisit);
		const conditional = variance / (1 + m * at.ratio);
		return {
			// Adding zero keeps a zero offset from being written as −0.
			offset: perVisit * residualSums[s]! + 0,
			conditionalStandardError: Math.sqrt(conditional),
			predictionStandardError: Math.sqrt(conditional + form(h, fit.curvature.covariance))
		};
	});
}
