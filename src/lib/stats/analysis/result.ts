import type { DroppedRows } from '../design/screening.js';
import type { AnalysisPlan } from '../plan.js';

/** A back-transformed estimate of an analysis on the log scale: exp of the estimate and of its limits. */
export interface Ratio {
	estimate: number;
	lower: number;
	upper: number;
}

/** An estimate with what its test and interval rest on. */
export interface Tested {
	name: string;
	/** Outcome unit (its logarithm on a log scale) per unit of what it is multiplied with. */
	estimate: number;
	/** Kenward–Roger's is the adjusted one. */
	se: number;
	/** Denominator degrees of freedom; need not be whole. */
	df: number;
	t: number;
	/** Two-sided; 0 when below the smallest number that can be held. */
	p: number;
	lower: number;
	upper: number;
	/** On a log scale only; null otherwise. */
	ratio: Ratio | null;
}

export interface AnalysedContrast extends Tested {
	/** One for each coefficient, in their order. */
	weights: number[];
	/** Independent rows that would tell as much about it; see `effectiveSizes`. */
	effectiveSampleSize: number;
}

/** An estimated part of the covariance, with profile-likelihood limits. */
export interface Component {
	/** `subject level`, `residual`, `visit`, `range`, `rho` … */
	name: string;
	/** Null where it has no meaning: the range of a serial part that is estimated as zero. */
	estimate: number | null;
	/** Null as the estimate is, or where the data set no limit on that side. */
	lower: number | null;
	upper: number | null;
	/** Whether the estimate stands at the edge of its range. */
	atEdge: boolean;
}

export interface AnalysisResult {
	engine: string;
	/** As carried out, with every default. */
	plan: AnalysisPlan;
	coefficients: Tested[];
	/** Of the coefficients, as their standard errors rest on; row by row. */
	covariance: number[][];
	contrasts: AnalysedContrast[];
	/** Variances and covariances in outcome units squared; correlations, and ranges in the unit of time, beside them. */
	varianceComponents: Component[];
	/**
	 * Share of the variance of an outcome at time 0 that a subject's outcomes have in common; null without a level or a common
	 * covariance, and where variances differ by visit or group.
	 */
	icc: Component | null;
	effectiveSampleSize: {
		/** Independent rows that would tell as much about the mean. */
		mean: number;
	};
	/** Restricted under REML, with X on the data's own scale: compare it only between models with the same mean. */
	logLikelihood: number;
	/** Coefficients and parameters of the covariance, counted alike for REML and ML. */
	parameters: number;
	aic: number;
	/** By what their logarithm counts. */
	bic: { rows: number; rowsLessCoefficients: number; subjects: number };
	/** Rows used. */
	observations: number;
	subjects: number;
	dropped: DroppedRows[];
	/** Coefficients left out because others determine them. */
	aliased: { name: string; by: string[] }[];
	/** Components estimated at the edge of their range, by name. */
	boundary: string[];
	converged: boolean;
	/** Slope of −2 log-likelihood at the end, in standard deviations of the parameters; 0 is flat. */
	gradientNorm: number;
	/** Whole sentences a reader must see. */
	warnings: string[];
}
