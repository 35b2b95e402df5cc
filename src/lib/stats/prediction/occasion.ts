import type { MeanCovariate, MeanTerm } from '../design/mean-terms.js';
import { levelPosition } from '../design/mean-terms.js';
import { StatsError } from '../errors.js';

/** An occasion of a subject: past, with its outcome, or to come. */
export interface SubjectOccasion {
	time: number;
	/** Label of the visit; needed when mean or errors go by visit. */
	visit?: string | null;
	/** By name, as the plan has them; `baseline` on the outcome's own scale. */
	covariates?: Readonly<Record<string, number | string>>;
}

export interface SubjectHistory {
	/** Null when the model has no group. */
	group: string | null;
	/** Outcomes on the outcome's own scale, in any order; may be empty. */
	past: readonly (SubjectOccasion & { outcome: number })[];
}

/** What a subject's next outcome is expected to be; on the outcome's own scale. */
export interface NextValue {
	/** Mean, or median on a log scale. */
	estimate: number;
	lower: number;
	upper: number;
	/** Of the outcome about the estimate, on the analysed scale. */
	standardDeviation: number;
}

export const bad = (sentence: string, facts: Record<string, string | number> = {}): StatsError =>
	new StatsError('bad-option', sentence, facts);

/** A value on the analysed scale. Errors: `not-finite`, `not-positive`. */
export function analysed(value: number, scale: string, what: string): number {
	if (!Number.isFinite(value))
		throw new StatsError('not-finite', `The ${what} is ${value}; it must be finite.`);
	if (scale === 'identity') return value;
	if (value > 0) return Math.log(value);
	throw new StatsError(
		'not-positive',
		`The ${what} is ${value}; on a log scale it must be above zero.`,
		{ value }
	);
}

/** The covariate columns of one occasion. Errors: `bad-option`, `unknown-level`, `wrong-kind`. */
export function covariateWeights(
	covariates: readonly MeanCovariate[],
	occasion: SubjectOccasion,
	scale: string
): (term: MeanTerm) => number {
	return (term) => {
		if (term.kind !== 'numeric' && term.kind !== 'category') return 0;
		const { name, kind, levels } = covariates[term.covariate]!;
		const value = occasion.covariates?.[name];
		if (value === undefined)
			throw bad(`The value of “${name}” is needed at time ${occasion.time}.`, { covariate: name });
		if (term.kind === 'category') {
			const level = levelPosition(levels, String(value), `level of “${name}”`);
			return level === term.level ? 1 : 0;
		}
		if (typeof value !== 'number')
			throw new StatsError(
				'wrong-kind',
				`The value of “${name}” is “${value}”; it must be a number.`
			);
		return analysed(value, kind === 'baseline' ? scale : 'identity', `value of “${name}”`);
	};
}
