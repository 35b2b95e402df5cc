import { StatsError } from '../errors.js';
import { studentQuantile, studentTwoSidedP } from '../numeric/distribution.js';

/** An estimate from several imputed data sets. */
export interface Pooled {
	estimate: number;
	se: number;
	/** Barnard–Rubin. */
	df: number;
	t: number;
	/** Two-sided. */
	p: number;
	lower: number;
	upper: number;
	/** Share of the variance that is between imputations, (1 + 1/M)B / T; unitless. */
	missingShare: number;
	/** Standard error of the estimate from having M imputations and not more. */
	monteCarloSe: number;
}

/**
 * The estimates of M imputed data sets put together by Rubin's rules.
 *
 * T = W + (1 + 1/M)B; degrees of freedom ((ν_m)⁻¹ + (ν_obs)⁻¹)⁻¹ with ν_m = (M − 1)/λ², λ = (1 + 1/M)B/T and
 * ν_obs = (ν + 1)/(ν + 3) · ν(1 − λ), ν the mean of those of the data sets. Errors: `bad-option`, `out-of-range`.
 * Source: Rubin (1987), Multiple Imputation for Nonresponse in Surveys, section 3.1; Barnard & Rubin (1999), Biometrika
 * 86:948-955.
 */
export function poolEstimates(
	estimates: ArrayLike<number>,
	variances: ArrayLike<number>,
	dfs: ArrayLike<number>,
	confidence = 0.95
): Pooled {
	const m = estimates.length;
	if (m < 2 || variances.length !== m || dfs.length !== m)
		throw new StatsError(
			'bad-option',
			`Rubin’s rules need at least two data sets, each with its estimate, variance and degrees of freedom; there are ${m}.`
		);
	const mean = (values: ArrayLike<number>) => Array.from(values).reduce((a, b) => a + b, 0) / m;
	const estimate = mean(estimates);
	const within = mean(variances);
	let between = 0;
	for (let i = 0; i < m; i++) between += (estimates[i]! - estimate) ** 2 / (m - 1);
	const added = (1 + 1 / m) * between;
	const total = within + added;
	const share = added / total;
	const whole = mean(dfs);
	const observed = ((whole + 1) / (whole + 3)) * whole * (1 - share);
	const df = 1 / ((share * share) / (m - 1) + 1 / observed);
	const se = Math.sqrt(total);
	const t = estimate / se;
	const reach = studentQuantile(confidence, df) * se;
	const pooled = {
		estimate,
		se,
		df,
		t,
		p: studentTwoSidedP(t, df),
		lower: estimate - reach,
		upper: estimate + reach,
		missingShare: share,
		monteCarloSe: Math.sqrt(between / m)
	};
	if (Object.values(pooled).every(Number.isFinite)) return pooled;
	throw new StatsError('out-of-range', 'The pooled estimate is too large or too small to be held.');
}
