/**
 * Words of planning a two-arm study with repeated measures. Variances are in outcome unit squared (the slope's over
 * time unit squared), the difference in outcome unit (over time unit for slopes). Arm 0 is the reference.
 */

/** Covariance of one subject's outcomes: a random level, a random slope and independent errors. */
export interface SubjectVariances {
	/** Within subjects, > 0. */
	residual: number;
	/** Of the level at time 0. */
	level: number;
	slope: number;
	levelSlopeCovariance: number;
}

/** Visits, what varies and who stays: everything but how many and how large the difference. */
export interface VisitDesign {
	/** Of the visits, increasing. */
	times: readonly number[];
	variances: SubjectVariances;
	/** Share of each arm gone by each visit, from 0 to below 1, never falling: [arm 0, arm 1]. */
	dropout: readonly [readonly number[], readonly number[]];
	/** How time enters the mean: a straight line in each arm, or each visit its own mean. */
	mean: 'linear' | 'categorical';
	/** Arms equal at time 0 (linear) or at the first visit (categorical). */
	commonBaseline: boolean;
}

/** What is to be told apart. */
export type Question =
	| ({ question: 'slope-difference' } & VisitDesign)
	/** `time` is that of a visit when visits are categories. */
	| ({ question: 'difference-at-visit'; time: number } & VisitDesign)
	/** Mean of `visits` outcomes of each subject, compound symmetry. */
	| ({ question: 'mean-difference' } & MeanDesign);

export interface MeanDesign {
	visits: number;
	/** Of one outcome, between and within subjects together. */
	totalVariance: number;
	/** Correlation of two outcomes of one subject. */
	icc: number;
	/** Follow-up alone, its change from baseline, or adjusted for baseline by regression. */
	analysis: 'follow-up' | 'change' | 'ancova';
	/** Visits before treatment; of no effect with `follow-up`. */
	baselineVisits: number;
}
