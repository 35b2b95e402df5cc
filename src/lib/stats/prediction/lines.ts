import type { Analysis } from '../analysis/analyse.js';
import type { BuiltDesign } from '../design/build-model-design.js';
import { meanAt, type When } from '../design/contrasts.js';
import { StatsError } from '../errors.js';
import type { Precision } from '../inference/precision.js';

const POINTS = 25;

/** A point of the mean with pointwise limits; on the outcome's own scale. */
export interface MeanPoint {
	/** Null where the mean goes by visit. */
	time: number | null;
	visit: string | null;
	/** Mean, or median on a log scale. */
	estimate: number;
	lower: number;
	upper: number;
}

export interface MeanLine {
	/** Null when there is one group. */
	group: string | null;
	points: MeanPoint[];
}

/** First and last used time of each group, or of everybody when there is one group. */
export function timeRanges({ design }: BuiltDesign): { from: number; to: number }[] {
	const ranges = Array.from({ length: Math.max(1, design.groups.length) }, () => ({
		from: Infinity,
		to: -Infinity
	}));
	for (let s = 0; s < design.subjects.length; s++) {
		const range = ranges[design.subjectGroup[s]!]!;
		for (let i = design.subjectStart[s]!; i < design.subjectStart[s + 1]!; i++) {
			range.from = Math.min(range.from, design.time[i]!);
			range.to = Math.max(range.to, design.time[i]!);
		}
	}
	return ranges;
}

function evenly(from: number, to: number): number[] {
	if (from === to) return [from];
	return Array.from({ length: POINTS }, (_, i) =>
		i === POINTS - 1 ? to : from + ((to - from) * i) / (POINTS - 1)
	);
}

/** Where a group's line is asked for: the times given, or evenly over its own range; visits where the mean goes by them. */
function occasionsFor(
	{ design }: BuiltDesign,
	range: { from: number; to: number },
	times: readonly number[] | undefined
): When[] {
	if (design.timeInMean === 'categorical') return design.visits.map((visit) => ({ visit }));
	return (times ?? evenly(range.from, range.to)).map((time) => ({ time }));
}

/** The lines on the analysed scale; see `fittedLines`. */
export function meanLines(
	built: BuiltDesign,
	precision: Precision,
	confidence: number,
	times?: readonly number[]
): MeanLine[] {
	return timeRanges(built).map((range, g) => {
		const group = built.design.groups[g] ?? null;
		return {
			group,
			points: occasionsFor(built, range, times).map((when) => {
				const { estimate, lower, upper } = precision.test(
					meanAt(built, group, when).inside,
					confidence
				);
				const at =
					'time' in when ? { time: when.time, visit: null } : { time: null, visit: when.visit };
				return { ...at, estimate, lower, upper };
			})
		};
	});
}

/**
 * The mean of each group along time with pointwise limits, covariates at their average over subjects.
 *
 * `times` left out: 25 evenly spaced over the group's own range; of no effect where the mean goes by visit, which has a
 * point for each visit. On a log scale points and limits are brought back to the outcome's.
 * Errors: `bad-option`, `not-estimable`, `out-of-range`.
 */
export function fittedLines(
	{ built, precision, result: { plan } }: Pick<Analysis, 'built' | 'precision' | 'result'>,
	{
		times,
		confidence = plan.confidence ?? 0.95
	}: { times?: readonly number[]; confidence?: number } = {}
): MeanLine[] {
	if (!(confidence > 0 && confidence < 1))
		throw new StatsError(
			'bad-option',
			`The confidence is ${confidence}; it must lie between 0 and 1.`
		);
	const lines = meanLines(built, precision, confidence, times);
	if (plan.scale === 'identity') return lines;
	return lines.map(({ group, points }) => ({
		group,
		points: points.map((p) => {
			const back = {
				estimate: Math.exp(p.estimate),
				lower: Math.exp(p.lower),
				upper: Math.exp(p.upper)
			};
			if (Object.values(back).every(Number.isFinite)) return { ...p, ...back };
			throw new StatsError(
				'out-of-range',
				'A point of the fitted line is too large to be brought back from the log scale.'
			);
		})
	}));
}
