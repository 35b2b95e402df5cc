import type { TimeInMean } from '../plan.js';

/**
 * The data as the likelihood sees them: numbers only, rows of one subject together and in the order of time.
 *
 * Whoever builds one promises: every number is finite, X has full column rank (aliased columns are left out and
 * listed), each subject has at least one row.
 */
export interface ModelDesign {
	/** Rows. */
	n: number;
	/** Columns of X. */
	p: number;
	/** n × p, column-major: row i of column j is `x[j * n + i]`; on the data's own scale. */
	x: Float64Array;
	/** On the analysed scale (its logarithm when the plan says so). */
	y: Float64Array;
	/** Name of each column. */
	names: string[];
	/** Study time of each row, in the data's unit. */
	time: Float64Array;
	/** Position in `visits` of each row; all 0 when there is no visit column. */
	visit: Int32Array;
	/** Labels of the visits in order (by mean time, then by label); empty without a visit column. */
	visits: string[];
	/** subjects + 1 long: the rows of subject s are `subjectStart[s]` up to, not including, `subjectStart[s + 1]`. */
	subjectStart: Int32Array;
	/** The caller's labels. */
	subjects: string[];
	/** Position in `groups` of each subject's group; all 0 without one. */
	subjectGroup: Int32Array;
	/** Levels in order, the first the reference; empty without a group. */
	groups: string[];
	/** Where each row stood among the rows handed in. */
	rowOf: Int32Array;
	/** How time enters the mean; `categorical` beside visit effects is refused. */
	timeInMean: TimeInMean;
	/** Columns left out because the others determine them, and which. */
	aliased: { name: string; by: string[] }[];
}
