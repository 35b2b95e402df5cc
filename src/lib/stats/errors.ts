/** Everything the statistics refuse to do, each with what the sentence of the error explains. */
export const statsErrorCodes = {
	'no-data': 'no row can be used',
	'not-finite': 'a number is NaN or infinite',
	'wrong-kind': 'a value is of another kind than the plan says',
	'bad-option': 'an option lies outside its range',
	'duplicate-name': 'two columns of the mean would carry one name',
	'unknown-level': 'a value is not among the levels given',
	'empty-level': 'a level has no usable row',
	'single-level': 'a category has one level only',
	'group-changes': 'a subject appears in two groups',
	'too-few-observations': 'too few rows for the coefficients and variances asked for',
	'too-few-subjects': 'too few subjects for the coefficients and variances asked for',
	'one-observation-per-subject': 'a lasting offset needs subjects seen more than once',
	'constant-outcome': 'every outcome is the same',
	'perfect-fit': 'the mean reproduces every outcome exactly',
	'no-residual-variation': 'nothing is left within subjects',
	'not-identified': 'no data of this kind can tell two parts of the model apart',
	'rank-deficient': 'a column of the mean is determined by others',
	'kenward-roger-needs-reml': 'Kenward–Roger is defined for REML only',
	'no-subject-effect': 'the model has no lasting offset',
	'shape-mismatch': 'lengths do not agree',
	'singular-information': 'the information on the variances is singular',
	'out-of-range': 'a result is too large or too small to be held',
	'bad-plan': 'the plan is not one that can be read or carried out',
	'unknown-column': 'the data have no column of a name the plan gives',
	'unknown-coefficient': 'the model has no coefficient of a name the plan gives',
	'missing-subject': 'a row does not say whose it is',
	'not-positive': 'an outcome on a log scale is zero or negative',
	'repeated-occasion': 'a subject has two rows where the model allows one',
	'not-estimable': 'a contrast asks for something the data do not determine',
	stopped: 'the caller asked to stop'
} as const;

export type StatsErrorCode = keyof typeof statsErrorCodes;

/** A refusal of the statistics: a code to act on, a whole sentence to show, and the facts it speaks of. */
export class StatsError extends Error {
	readonly code: StatsErrorCode;
	readonly facts: Readonly<Record<string, string | number | readonly string[]>>;

	constructor(
		code: StatsErrorCode,
		sentence: string,
		facts: Readonly<Record<string, string | number | readonly string[]>> = {}
	) {
		super(sentence);
		this.name = 'StatsError';
		this.code = code;
		this.facts = facts;
	}
}
