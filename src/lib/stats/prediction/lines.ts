import type { Design } from '../design/design.js';
import { entry } from '../design/terms.js';
import type { Fit } from '../fit/fit-mixed.js';
import { testContrast } from '../inference/contrast.js';
import type { PrecisionRule } from '../inference/degrees-of-freedom.js';
import type { FittedLine } from '../types.js';

const POINTS = 25;

/** The covariate columns of X at their average over subjects, each subject counting once; by column. */
export function averageCovariates(
	design: Design
): { name: string; column: number; value: number }[] {
	const { n, subjects } = design;
	const sizes = new Float64Array(subjects.length);
	for (const s of design.subject) sizes[s]!++;
	return design.terms.flatMap((term, column) => {
		if (term.kind !== 'numeric' && term.kind !== 'category') return [];
		let value = 0;
		for (let i = 0; i < n; i++) value += design.x[column * n + i]! / sizes[design.subject[i]!]!;
		return [{ name: design.names[column]!, column, value: value / subjects.length }];
	});
}

/** First and last used time of each group, or of everybody when there is one group. */
export function timeRanges(design: Design): { from: number; to: number }[] {
	const ranges = Array.from({ length: Math.max(1, design.groups.length) }, () => ({
		from: Infinity,
		to: -Infinity
	}));
	design.time.forEach((t, i) => {
		const range = ranges[design.subjectGroup[design.subject[i]!]!]!;
		range.from = Math.min(range.from, t);
		range.to = Math.max(range.to, t);
	});
	return ranges;
}

/**
 * Weights on the coefficients (p long) that give the mean outcome of a group at a time.
 *
 * `average`: what `averageCovariates` gives, the values at which covariate columns are held.
 */
export function weightsOfMean(
	design: Design,
	group: number,
	time: number,
	average: readonly { column: number; value: number }[]
): number[] {
	const weights = design.terms.map((term) =>
		term.kind === 'numeric' || term.kind === 'category'
			? 0
			: entry(term, { time, group, covariates: [] })
	);
	for (const { column, value } of average) weights[column] = value;
	return weights;
}

/**
 * The population line of each group with pointwise limits; outcome unit.
 *
 * `times` left out: 25 evenly spaced over the group's own observed range. Covariates at their average over subjects.
 */
export function fittedLines(
	fit: Fit,
	rule: PrecisionRule,
	confidence: number,
	times?: readonly number[]
): FittedLine[] {
	const { design } = fit;
	const average = averageCovariates(design);
	return timeRanges(design).map(({ from, to }, group) => ({
		group: design.groups[group] ?? null,
		points: (times ?? evenly(from, to)).map((time) => {
			const { estimate, lower, upper } = testContrast(
				fit,
				rule,
				weightsOfMean(design, group, time, average),
				confidence
			);
			return { time, estimate, lower, upper };
		})
	}));
}

function evenly(from: number, to: number): number[] {
	if (from === to) return [from];
	return Array.from({ length: POINTS }, (_, i) =>
		i === POINTS - 1 ? to : from + ((to - from) * i) / (POINTS - 1)
	);
}
