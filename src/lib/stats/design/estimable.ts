import { StatsError } from '../errors.js';
import type { BuiltDesign, MeanColumns } from './build-model-design.js';

/** A linear combination of the coefficients. */
export interface Contrast {
	/** One weight for each of `design.names`. */
	weights: number[];
	/** The same on the coefficients of the columns of X; what a fit is asked. */
	inside: number[];
}

/** Weights over all columns of the mean, those left out of X too. */
export interface Full {
	own: number[];
	inside: number[];
}

/** How far a weight may be from what the determining columns imply, relative to the largest weight. */
const ESTIMABLE = 1e-7;

const list = (names: readonly string[]) => names.map((name) => `“${name}”`).join(', ');

/**
 * The name of a left-out column that stands in the way of a combination, or null when the data determine it.
 *
 * With column j = Σ a_k × column k, a combination w is estimable when w_j = Σ a_k w_k for every column j left out.
 * Source: Searle (1971), Linear Models, 5.4.
 */
export function obstacle(
	{ aliased, names }: MeanColumns,
	inside: readonly number[]
): string | null {
	const size = Math.max(...inside.map(Math.abs));
	for (const { column, of } of aliased) {
		let implied = 0;
		let terms = Math.abs(inside[column]!);
		for (const { column: k, weight } of of) {
			implied += weight * inside[k]!;
			terms = Math.max(terms, Math.abs(weight * inside[k]!));
		}
		if (Math.abs(inside[column]! - implied) > ESTIMABLE * Math.max(size, terms))
			return names[column]!;
	}
	return null;
}

/**
 * A combination of all columns as one of those X holds. `what` begins the sentence of a refusal.
 * Errors: `not-estimable`, `bad-option`.
 */
export function finish(
	{ columns, design }: BuiltDesign,
	{ own, inside }: Full,
	what: string
): Contrast {
	const name = obstacle(columns, inside);
	if (name !== null) {
		const by = design.aliased.find((a) => a.name === name)!.by;
		throw new StatsError(
			'not-estimable',
			by.length === 0
				? `${what} cannot be estimated: it needs “${name}”, for which there is no usable row.`
				: `${what} cannot be estimated: it needs “${name}”, which ${list(by)} ${by.length === 1 ? 'determines' : 'determine'} in the usable rows.`,
			{ coefficient: name, determinedBy: by }
		);
	}
	const contrast = {
		weights: columns.kept.map((j) => own[j]!),
		inside: columns.kept.map((j) => inside[j]!)
	};
	if (contrast.inside.every((w) => w === 0)) {
		throw new StatsError(
			'bad-option',
			`${what} is zero whatever the data: no coefficient takes part.`
		);
	}
	return contrast;
}
