import { StatsError } from '../errors.js';
import type { BuiltDesign } from './build-model-design.js';
import type { Full } from './estimable.js';
import type { MeanTerm } from './mean-terms.js';
import type { Occasion } from './time-basis.js';

/** Of covariate columns (those that are no time and no group); by position among all columns. */
export type CovariateWeights = (term: MeanTerm, column: number) => number;

export const none: CovariateWeights = () => 0;

export const minus = (a: Full, b: Full): Full => ({
	own: a.own.map((w, j) => w - b.own[j]!),
	inside: a.inside.map((w, j) => w - b.inside[j]!)
});

/** Weights of the mean of a group at an occasion. */
export function meanRow(
	{ columns, parts }: BuiltDesign,
	{ time, visit }: Occasion,
	group: number,
	covariates: CovariateWeights
): Full {
	const row = (form: 'at' | 'ownAt') =>
		columns.terms.map((term, column) => {
			switch (term.kind) {
				case 'intercept':
					return 1;
				case 'time':
					return parts.time[term.index]![form](time, visit);
				case 'group':
					return term.level === group ? 1 : 0;
				case 'time-by-group':
					return term.level === group ? parts.timeByGroup[term.index]![form](time, visit) : 0;
				default:
					return covariates(term, column);
			}
		});
	return { own: row('ownAt'), inside: row('at') };
}

/** Weights of the slope of a group at a time. Errors: `bad-option`. */
export function slopeRow(
	{ columns, parts, design }: BuiltDesign,
	group: number,
	time: number
): Full {
	if (design.timeInMean === 'categorical' || design.timeInMean === 'none') {
		throw new StatsError(
			'bad-option',
			design.timeInMean === 'none'
				? 'Time is not in the mean, so there is no slope.'
				: 'Visits are categories in the mean, so there is no slope. Ask for a change between visits.'
		);
	}
	const row = (form: 'slope' | 'ownSlope') =>
		columns.terms.map((term) => {
			if (term.kind === 'time') return parts.time[term.index]![form]!(time);
			if (term.kind === 'time-by-group' && term.level === group)
				return parts.timeByGroup[term.index]![form]!(time);
			return 0;
		});
	return { own: row('ownSlope'), inside: row('slope') };
}

/** Average over subjects of each subject's average, of the column `at` of X. */
function averageOverSubjects({ design }: BuiltDesign, at: number): number {
	const { subjectStart, x, n } = design;
	const subjects = subjectStart.length - 1;
	let sum = 0;
	for (let s = 0; s < subjects; s++) {
		let own = 0;
		for (let i = subjectStart[s]!; i < subjectStart[s + 1]!; i++) own += x[at * n + i]!;
		sum += own / (subjectStart[s + 1]! - subjectStart[s]!);
	}
	return sum / subjects;
}

/** The average of every covariate column, those left out worked out from what determines them. */
export function averageCovariates(built: BuiltDesign): CovariateWeights {
	const { kept, aliased } = built.columns;
	const known = new Map<number, number>();
	const averageOf = (column: number): number => {
		const there = known.get(column);
		if (there !== undefined) return there;
		const at = kept.indexOf(column);
		const value =
			at >= 0
				? averageOverSubjects(built, at)
				: aliased
						.find((a) => a.column === column)!
						.of.reduce((sum, o) => sum + o.weight * averageOf(o.column), 0);
		known.set(column, value);
		return value;
	};
	return (_, column) => averageOf(column);
}
