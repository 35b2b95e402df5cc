import { StatsError } from '../errors.js';
import type { Fit } from '../fit/fit-mixed.js';
import { studentQuantile, studentTwoSidedP } from '../numeric/distribution.js';
import { toBasis } from '../numeric/orthonormal.js';
import type { TestedEstimate } from '../types.js';
import type { PrecisionRule } from './degrees-of-freedom.js';

/**
 * Estimate, standard error, t test and interval of Σ weights · β.
 *
 * `weights`: p long, one for each coefficient in order; the unit of the result is theirs times the coefficients'.
 * t = estimate / se on the rule's degrees of freedom; p two-sided; interval estimate ± t quantile · se.
 * Errors: `shape-mismatch`, `out-of-range`.
 */
export function testContrast(
	fit: Fit,
	rule: PrecisionRule,
	weights: readonly number[],
	confidence: number
): TestedEstimate {
	if (weights.length !== fit.design.p) {
		throw new StatsError(
			'shape-mismatch',
			`The contrast has ${weights.length} weights for ${fit.design.p} coefficients.`,
			{ weights: weights.length, coefficients: fit.design.p }
		);
	}
	if (weights.every((w) => w === 0)) {
		throw new StatsError('bad-option', 'Every weight of the contrast is zero.');
	}
	const inBasis = toBasis(fit.products.basis, weights);
	const estimate = inBasis.reduce((sum, w, i) => sum + w * fit.coordinates[i]!, 0);
	const { variance, df } = rule.of(inBasis);
	const standardError = Math.sqrt(variance);
	const t = estimate / standardError;
	if (![t, df].every(Number.isFinite) || !(standardError > 0)) {
		throw new StatsError('out-of-range', 'The contrast is too large or too small to be tested.');
	}
	const reach = studentQuantile(confidence, df) * standardError;
	return {
		estimate,
		standardError,
		df,
		t,
		p: studentTwoSidedP(t, df),
		lower: estimate - reach,
		upper: estimate + reach
	};
}
