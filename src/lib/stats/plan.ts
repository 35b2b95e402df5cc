/**
 * The plan of a repeated-measures analysis in plain words, as it is written in a JSON file or built on a screen.
 * `numbers` and `names` of the data are referred to by column name; nothing here is code or a formula.
 */

/** Which lasting differences between subjects the model has. */
export type SubjectEffects =
	'none' | 'level' | 'level-and-slope' | 'level-and-slope-uncorrelated' | 'slope';

/** How the leftover errors of one subject hang together. */
export type ErrorStructure =
	| 'independent'
	| 'serial'
	| 'serial-with-noise'
	| 'compound-symmetry'
	| 'toeplitz'
	| 'unstructured';

/** Everything about the covariance of the outcomes given the mean. */
export interface Dependence {
	subjectEffects: SubjectEffects;
	/** An effect of each visit shared by all subjects, crossed with them. */
	visitEffects: boolean;
	errors: {
		structure: ErrorStructure;
		/**
		 * Serial errors only: `time` is exp(−|Δt|/range) in continuous time; `visit` is ρ to the power of the
		 * difference of visit positions, and there ρ may be negative.
		 */
		along: 'time' | 'visit';
		/** Whether the whole leftover covariance is scaled by a standard deviation per visit or per group: D R D. */
		varianceBy: 'none' | 'visit' | 'group';
	};
}

/** How time enters the mean. Knots are in the unit of the time column; a degree of 1 is linear. */
export type TimeInMean =
	'none' | 'linear' | 'categorical' | { knots: number[] } | { degree: number };

export interface Mean {
	time: TimeInMean;
	/** Whether each group has its own course; of no effect without a group. */
	groupByTime: boolean;
	/** No group effect at time 0 (or at the first visit, when visits are categories): the groups start equal. */
	commonBaseline: boolean;
	covariates: PlanCovariate[];
}

export type PlanCovariate =
	| { name: string; kind: 'numeric' }
	| { name: string; kind: 'categorical'; levels?: string[] }
	/** The subject's own outcome at the first occasion (time 0), taken out of the outcomes; excludes a common baseline. */
	| { kind: 'baseline' };

export type FitMethod = 'reml' | 'ml';
export type DegreesOfFreedomRule = 'kenward-roger' | 'satterthwaite' | 'naive';

export interface PlanContrast {
	name: string;
	/** A weight for each coefficient named; the others have weight 0. */
	weights: Record<string, number>;
}

export interface AnalysisPlan {
	outcome: string;
	/** `log`: the natural logarithm of the outcome is analysed, and ratios are reported besides. */
	scale: 'identity' | 'log';
	subject: string;
	time: string;
	/** Needed by visit effects, categorical time, and errors that go by visit. */
	visit?: string | null;
	group?: string | null;
	mean: Mean;
	subjectEffects: SubjectEffects;
	visitEffects: boolean;
	errors: Dependence['errors'];
	method: FitMethod;
	degreesOfFreedom: DegreesOfFreedomRule;
	/** Of every interval; 0.95 unless said otherwise. */
	confidence?: number;
	contrasts?: PlanContrast[];
}
