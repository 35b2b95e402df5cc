import type { MeanParts, MeanTerm } from './mean-terms.js';

/**
 * How the coefficients people read come from those of the columns inside: own = T · inside.
 *
 * Needed for polynomials alone, whose powers are centred and scaled inside.
 */
export interface OwnScale {
	/** p × p, row by row. */
	matrix: Float64Array;
	/** log |det T|: what a restricted log-likelihood gains when X is on the data's own scale. */
	logDeterminant: number;
}

/** T for these columns, or null when the columns are already on the data's own scale. */
export function ownScaleOf(terms: readonly MeanTerm[], parts: MeanParts): OwnScale | null {
	const p = terms.length;
	const matrix = new Float64Array(p * p);
	let plain = true;
	let logDeterminant = 0;
	const columnOf = (same: (term: MeanTerm) => boolean) => terms.findIndex(same);
	terms.forEach((term, j) => {
		const expansion =
			term.kind === 'time'
				? parts.time[term.index]!.expansion
				: term.kind === 'time-by-group'
					? parts.timeByGroup[term.index]!.expansion
					: null;
		if (!expansion) {
			matrix[j * p + j] = 1;
			return;
		}
		plain = false;
		expansion.forEach((weight, k) => {
			const row = columnOf((other) => {
				if (term.kind === 'time')
					return k === 0
						? other.kind === 'intercept'
						: other.kind === 'time' && other.index === k - 1;
				if (term.kind !== 'time-by-group' || !('level' in other) || other.level !== term.level)
					return false;
				return k === 0
					? other.kind === 'group'
					: other.kind === 'time-by-group' && other.index === k - 1;
			});
			if (row >= 0) matrix[row * p + j] = weight;
		});
		logDeterminant += Math.log(Math.abs(expansion.at(-1)!));
	});
	return plain ? null : { matrix, logDeterminant };
}

/** T'w: from weights on the coefficients people read to weights on those inside. */
export function toInside(ownScale: OwnScale | null, weights: readonly number[]): number[] {
	if (!ownScale) return [...weights];
	const p = weights.length;
	return weights.map((_, j) =>
		weights.reduce((sum, w, i) => (w === 0 ? sum : sum + w * ownScale.matrix[i * p + j]!), 0)
	);
}
