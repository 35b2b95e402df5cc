/**
 * What goes into the statistics and what comes out. Numbers carry no units here: the caller checks that
 * they agree and puts them back. "Outcome unit" below is the unit of `outcome`, "time unit" that of `time`.
 * Everything in a result is plain data: it survives `JSON.stringify` unchanged, and holds no NaN or Infinity.
 */

/** One occasion of one subject. */
export interface GrowthRow {
	/** The caller's label of the subject; rows with the same label belong together. */
	subject: string;
	/** Study time, finite. */
	time: number;
	/** Outcome, finite; null when it was not measured. */
	outcome: number | null;
	/** The subject's group; it may not change within a subject. */
	group?: string | null;
	/** Values by covariate name; null or absent when unknown. */
	covariates?: Readonly<Record<string, number | string | null>>;
}

export type CovariateSpec =
	| { name: string; kind: 'numeric' }
	| {
			name: string;
			kind: 'categorical';
			/** The first is the reference; left out, the levels found are sorted. */
			levels?: readonly string[];
	  };

/** The mean: intercept + time, then as asked. */
export interface GrowthSpec {
	/** Left out or null: one group. Levels left out: those found, sorted. The first is the reference. */
	group?: { levels?: readonly string[] } | null;
	/** Whether each group has its own slope; true unless said otherwise, of no effect without a group. */
	groupByTime?: boolean;
	covariates?: readonly CovariateSpec[];
}

export type Method = 'REML' | 'ML';

/** `naive` is rows minus rank. Kenward–Roger is defined for REML only. */
export type DegreesOfFreedom = 'kenward-roger' | 'satterthwaite' | 'naive';

/** What a long computation may tell and be told. */
export interface Supervision {
	/** Told a fraction from 0 to 1, never falling. */
	onProgress?: (fraction: number) => void;
	/** Asked between steps; true ends the work with the error `stopped`. */
	shouldStop?: () => boolean;
}

export interface GrowthOptions extends Supervision {
	/** REML unless said otherwise. */
	method?: Method;
	/** A lasting offset of each subject; true unless said otherwise. */
	randomIntercept?: boolean;
	/** Kenward–Roger under REML and Satterthwaite under ML unless said otherwise. */
	degreesOfFreedom?: DegreesOfFreedom;
	/** Of every interval; 0.95 unless said otherwise. */
	confidence?: number;
	/** Times at which groups are compared; the last observed time unless said otherwise. */
	differenceTimes?: readonly number[];
	/** Times of the fitted lines; 25 evenly spaced over each group's own range unless said otherwise. */
	lineTimes?: readonly number[];
}

/** An estimate with everything its test and interval rest on. */
export interface TestedEstimate {
	/** Outcome unit, per time unit for a slope, per covariate unit for a covariate. */
	estimate: number;
	/** Unit of the estimate; Kenward–Roger's is the adjusted one. */
	standardError: number;
	/** Denominator degrees of freedom; need not be whole. */
	df: number;
	/** Estimate / standard error. */
	t: number;
	/** Two-sided; 0 when below the smallest number that can be held. */
	p: number;
	lower: number;
	upper: number;
}

export interface Coefficient extends TestedEstimate {
	/** `intercept`, `time`, `group[girl]`, `time:group[girl]`, `bmi`, `site[Saltreach]`. */
	name: string;
}

export type ContrastKind = 'slope' | 'slope-difference' | 'difference-at-time';

export interface NamedContrast extends TestedEstimate {
	/** `slope[boy]`, `slope-difference[girl-boy]`, `difference[girl-boy]@6`; `slope` when there is one group. */
	name: string;
	kind: ContrastKind;
	/** The group it is about, null when there is one group or the slope is common to all. */
	group: string | null;
	/** The group it is compared with, null for a slope. */
	reference: string | null;
	/** Null unless the contrast is at a time. */
	time: number | null;
	/** One weight for each coefficient, in the order of `coefficients`. */
	weights: number[];
}

export interface VarianceComponent {
	/** `subject`: between subjects, the variance of the lasting offset. `residual`: within them. */
	name: 'subject' | 'residual';
	/** Outcome unit squared. */
	estimate: number;
	/** Outcome unit. */
	standardDeviation: number;
	/** Profile-likelihood limits of the variance. */
	lower: number;
	upper: number;
}

export interface IntervalEstimate {
	estimate: number;
	lower: number;
	upper: number;
}

export interface Counts {
	/** Rows handed in. */
	rows: number;
	/** Rows the model used. */
	observations: number;
	/** Subjects with at least one used row. */
	subjects: number;
	/** Subjects handed in of whom no row could be used. */
	droppedSubjects: number;
	/** Rows whose outcome is missing. */
	droppedOutcomes: number;
	/** Rows with an outcome whose group or a covariate is missing. */
	droppedRows: number;
	/** How many of `droppedRows` lack each (`group` or a covariate's name); a row may lack several. */
	missingByVariable: { name: string; rows: number }[];
	/** Used rows on the subject with the fewest and the most. */
	fewestPerSubject: number;
	mostPerSubject: number;
}

export interface GroupSummary {
	name: string;
	subjects: number;
	observations: number;
}

export interface LinePoint {
	time: number;
	/** Mean outcome at that time, with pointwise limits; outcome unit. */
	estimate: number;
	lower: number;
	upper: number;
}

export interface FittedLine {
	/** Null when there is one group. */
	group: string | null;
	points: LinePoint[];
}

/** Best linear unbiased prediction of a subject's lasting offset from the mean; outcome unit. */
export interface SubjectEffect {
	offset: number;
	/** With the coefficients taken as known. */
	conditionalStandardError: number;
	/** With their uncertainty. */
	predictionStandardError: number;
}

export interface Trajectory {
	/** Position in `trajectories`; `residuals[].subject` points here. Order of first used row. */
	subject: number;
	/** The caller's label. */
	label: string;
	group: string | null;
	/** In the order of time. `fitted` includes the subject's own offset. */
	points: { time: number; outcome: number; fitted: number }[];
	/** Null when the model has no lasting offset. */
	effect: SubjectEffect | null;
}

/** One used row, in the order handed in; outcome unit. */
export interface ResidualPoint {
	/** Position in `trajectories`. */
	subject: number;
	time: number;
	/** Fitted value with the subject's own offset; what the conditional residual is plotted against. */
	fitted: number;
	/** Fitted value of the population line. */
	marginalFitted: number;
	/** Outcome minus `fitted`. */
	conditional: number;
	/** Outcome minus `marginalFitted`. */
	marginal: number;
}

export type NoteCode =
	| 'subject-variance-zero'
	| 'not-converged'
	| 'rows-dropped'
	| 'subjects-dropped'
	| 'lines-at-average-covariates'
	| 'effective-size-is-for-the-mean'
	| 'extrapolated';

/** Something a reader must know; the sentence is whole and may be printed as it is. */
export interface Note {
	code: NoteCode;
	sentence: string;
}

export interface EffectiveSampleSize {
	/** Independent observations that would tell as much about the mean: sum of n_i / (1 + (n_i - 1) ICC). */
	forMean: number;
	/** Used rows ÷ `forMean`. */
	designEffect: number;
}

/** The model in words: what was asked for, with every default filled in. */
export interface ModelDescription {
	method: Method;
	randomIntercept: boolean;
	degreesOfFreedom: DegreesOfFreedom;
	confidence: number;
	/** Coefficient names in order. */
	terms: string[];
	/** Levels in order, the first the reference; empty when there is one group. */
	groupLevels: string[];
	groupByTime: boolean;
	covariates: { name: string; kind: 'numeric' | 'categorical'; levels: string[] }[];
	/** Covariate columns held at these values on the fitted lines: their average over subjects. */
	linesAt: { name: string; value: number }[];
	timeRange: { from: number; to: number };
}

export interface InformationCriteria {
	/** Coefficients + variance components; the same count for REML and ML. */
	parameters: number;
	aic: number;
	/** parameters × log(rows), log(rows − coefficients), log(subjects). */
	bicRows: number;
	bicRowsMinusCoefficients: number;
	bicSubjects: number;
}

export interface GrowthResult {
	engineVersion: string;
	model: ModelDescription;
	counts: Counts;
	/** Empty when there is one group. */
	groups: GroupSummary[];
	coefficients: Coefficient[];
	/** Covariance of the coefficients that the standard errors rest on, row by row. */
	covariance: number[][];
	contrasts: NamedContrast[];
	varianceComponents: VarianceComponent[];
	/** Correlation of two outcomes of one subject given the mean; null without a lasting offset in the model. */
	icc: IntervalEstimate | null;
	effectiveSampleSize: EffectiveSampleSize;
	/** Restricted log-likelihood under REML; compare it only between models with the same mean. */
	logLikelihood: number;
	minusTwoLogLikelihood: number;
	criteria: InformationCriteria;
	fittedLines: FittedLine[];
	trajectories: Trajectory[];
	residuals: ResidualPoint[];
	converged: boolean;
	/** How far the slope of −2 log-likelihood says the optimum still is, in units of its own curvature; near 0. */
	gradient: number;
	iterations: number;
	/** The between-subject variance is estimated as exactly zero. */
	boundary: boolean;
	notes: Note[];
}
