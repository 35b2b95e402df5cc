import type { EffectiveSampleSizes } from './sizes.js';
import type { ModelDesign } from '../design/model-design.js';
import type { LikelihoodRatioTest } from '../inference/likelihood-ratio.js';
import type { FitMethod } from '../plan.js';
import type { Supervision } from '../types.js';
import type { FamilyKind, FamilyMember } from './family.js';

export interface EvidenceOptions extends Supervision {
	/** Data sets drawn under each model and refitted; 400 unless said otherwise, at least 100. */
	refits?: number;
	/** A whole number; 20260101 unless said otherwise. The same seed gives the same bits. */
	seed?: number;
	/** REML unless said otherwise. */
	method?: FitMethod;
	/** Whether serial errors fade with time (the default) or from visit to visit, where ρ may be negative. */
	along?: 'time' | 'visit';
	/** The contrast whose effective sample size is told: a weight for each column of the design. */
	contrast?: { name: string; weights: readonly number[] };
	/** Added to every log-likelihood told, for designs whose columns are scaled; 0 unless said otherwise. */
	logLikelihoodShift?: number;
}

/** One model fitted to the data as they are; plain data. */
export interface FittedMember {
	id: string;
	words: string;
	fitted: true;
	logLikelihood: number;
	/** Coefficients and every parameter of the covariance. */
	parameters: number;
	aic: number;
	bic: { rows: number; subjects: number };
	/** Variances in outcome unit squared; `range` in the time unit. */
	estimates: { name: string; estimate: number }[];
	/** Components at the edge of their space, by name. */
	boundary: string[];
	converged: boolean;
	effectiveSampleSize: EffectiveSampleSizes;
}

/** A model that this design cannot carry, and the sentence that says why. */
export interface UnfittedMember {
	id: string;
	words: string;
	fitted: false;
	reason: string;
}

/**
 * A gain in log-likelihood, best of `rivals` over `held`, and where it falls among data sets drawn under a model.
 *
 * `p` is (1 + those at least as far, refits that failed among them) / (1 + refits): Davison & Hinkley (1997), Bootstrap
 * Methods and their Application, 4.2. Its Monte Carlo error is √(p(1 − p) / (1 + refits)).
 */
export interface Comparison {
	name: ComparisonName;
	held: string;
	rivals: string[];
	/** The model the data sets were drawn under; `weak` is a lasting offset that holds a tenth of the variance. */
	under: string;
	/** Which tail is counted. */
	tail: 'at-least' | 'at-most';
	observed: number;
	refits: number;
	/** Refits that did not converge: counted as being at least as far. */
	failed: number;
	p: number;
	monteCarloError: number;
	/** Of the gains under the model; null when every refit failed. */
	quantiles: { lower: number; middle: number; upper: number } | null;
	/** The same by the chi-squared mixture at the edge of the space, where one is known. */
	mixture: LikelihoodRatioTest | null;
}

export type ComparisonName =
	| 'any dependence'
	| 'level over independent'
	| 'serial over independent'
	| 'weak offset'
	| 'serial over level'
	| 'level over serial'
	| 'more than level'
	| 'slope beside level'
	| 'serial beside level'
	| 'more than serial'
	| 'level beside serial'
	| 'noise beside serial'
	| 'visit beside level'
	| 'visit beside serial'
	| 'more than level+slope'
	| 'more than level+serial'
	| 'more than serial+noise'
	| 'more than level+serial+noise';

export type Answer = 'yes' | 'no' | 'too-short' | 'not-asked';

/**
 * What the data say as a whole. `outside`: no model of the family stands. `lasting`: a lasting offset, and what there is
 * besides cannot be told when `fading` or `drifting` says so.
 */
export type Verdict =
	'none' | 'lasting' | 'fading' | 'lasting-and-fading' | 'drifting' | 'too-short' | 'outside';

export interface EvidenceAnswers {
	verdict: Verdict;
	/** The models that stand, the verdict's grounds; empty when none does. */
	standing: string[];
	/** Is there a lasting offset of each subject? */
	lastingOffset: Answer;
	/** Do errors hang together and fade with time? */
	fading: Answer;
	/** Do subjects drift apart at rates of their own? */
	drifting: Answer;
	/** Do visits move everyone together? `no`: none is shown. */
	together: Answer;
}

export interface EvidenceResult {
	engine: string;
	method: FitMethod;
	refits: number;
	seed: number;
	observations: number;
	subjects: number;
	models: (FittedMember | UnfittedMember)[];
	/** Whether the kinds were compared with visit effects in all of them. */
	visitsInAll: boolean;
	comparisons: Comparison[];
	answers: EvidenceAnswers;
	/** Over the models that stand (over all fitted when none does): lowest and highest. */
	effectiveSampleSize: {
		mean: { lowest: number; highest: number };
		contrast: { name: string; lowest: number; highest: number } | null;
	};
	/** Refits of all comparisons, those that began anew at all starting points, and those that did not converge. */
	refitted: { refits: number; restarted: number; failed: number };
	/** Whole sentences, to be printed as they are. */
	sentences: string[];
}

/** A model as a thread needs it: plain data. */
export interface PlannedMember {
	member: FamilyMember;
	/** On the data as they are. */
	logLikelihood: number;
}

/** Where refits of one model to the data sets of one world set out. */
export interface Start {
	working: number[];
	/** Inverse of the second derivatives there, k × k; null where they are not positive definite. */
	inverse: Float64Array | null;
}

/** What data sets are drawn under, and which models are refitted to them. */
export interface World {
	id: string;
	/** Its random streams: replicate k draws from stream `number` · 2³² + k. */
	number: number;
	/** The model drawn from, and its working parameters. */
	from: string;
	working: number[];
	/** What lies within another comes before it. */
	refit: string[];
	/** For each of `refit`. */
	starts: Start[];
}

export interface PlannedComparison {
	name: ComparisonName;
	held: string;
	rivals: string[];
	under: string;
	tail: 'at-least' | 'at-most';
	mixture: LikelihoodRatioTest | null;
}

/** Everything a thread needs for its share of the refits; plain data that may cross threads. */
export interface EvidencePlan {
	design: ModelDesign;
	method: FitMethod;
	refits: number;
	seed: number;
	contrast: string | null;
	visitsInAll: boolean;
	models: (FittedMember | UnfittedMember)[];
	members: PlannedMember[];
	comparisons: PlannedComparison[];
	worlds: World[];
}

/** Replicates `from` to `to` − 1 of every world; columns in the order of `World.refit`. */
export interface EvidencePart {
	from: number;
	to: number;
	worlds: {
		id: string;
		logLikelihood: Float64Array[];
		/** 1 where the refit did not converge; its log-likelihood is 0 and means nothing. */
		failed: Uint8Array[];
		restarted: number;
	}[];
}

export type { FamilyKind, FamilyMember };
