import type { BuiltDesign } from '../design/build-model-design.js';
import type { MeanTerm } from '../design/mean-terms.js';
import type { NamedContrast } from '../types.js';

type Untested = Pick<NamedContrast, 'name' | 'kind' | 'group' | 'reference' | 'time' | 'weights'>;

/** Weights of the slope of a group: the common slope and what the group adds to it. */
function slopeWeights(terms: readonly MeanTerm[], group: number): number[] {
	return terms.map((term) =>
		term.kind === 'time' || (term.kind === 'time-by-group' && term.level === group) ? 1 : 0
	);
}

function differenceWeights(terms: readonly MeanTerm[], group: number, time: number): number[] {
	return terms.map((term) => {
		if (term.kind === 'group' && term.level === group) return 1;
		return term.kind === 'time-by-group' && term.level === group ? time : 0;
	});
}

/**
 * What a growth model is asked: the slope of each group, each group's slope against the reference group's, and
 * each group's mean against the reference group's at the given times. Without a group: the slope alone.
 */
export function contrastsOf(
	{ parts, columns: { terms } }: BuiltDesign,
	differenceTimes: readonly number[]
): Untested[] {
	const { groups } = parts;
	const groupByTime = parts.timeByGroup.length > 0;
	const [reference = null, ...others] = groups;
	const slope = (name: string, group: string | null, level: number): Untested => ({
		name,
		kind: 'slope',
		group,
		reference: null,
		time: null,
		weights: slopeWeights(terms, level)
	});
	const slopes = groupByTime
		? groups.map((group, level) => slope(`slope[${group}]`, group, level))
		: [slope('slope', null, 0)];
	const slopeDifferences = others.map((group, i): Untested => ({
		name: `slope-difference[${group}-${reference}]`,
		kind: 'slope-difference',
		group,
		reference,
		time: null,
		weights: terms.map((t) => (t.kind === 'time-by-group' && t.level === i + 1 ? 1 : 0))
	}));
	const differences = others.flatMap((group, i) =>
		differenceTimes.map((time): Untested => ({
			name: `difference[${group}-${reference}]@${time}`,
			kind: 'difference-at-time',
			group,
			reference,
			time,
			weights: differenceWeights(terms, i + 1, time)
		}))
	);
	return [...slopes, ...(groupByTime ? slopeDifferences : []), ...differences];
}
