import type { NaturalModel } from '../dependence/natural.js';
import type { Derivatives, Occasions } from '../dependence/occasions.js';
import { occasionsOf, patternKey } from '../dependence/occasions.js';
import { StatsError } from '../errors.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import { choleskyInPlace, solveLower } from '../numeric/dense.js';

/** Subjects whose covariance is the same, with its Cholesky factor and whitened derivatives L⁻¹V_kL⁻ᵀ. */
export interface WhitenedPattern {
	n: number;
	subjects: number[];
	factor: Float64Array;
	/** Of each block parameter; empty where it does not touch this pattern. */
	first: Float64Array[];
	second: { k: number; l: number; matrix: Float64Array }[];
}

/** L⁻¹ M L⁻ᵀ for a symmetric M; what is empty stays so. */
function whitened(l: Float64Array, n: number, m: Float64Array): Float64Array {
	if (m.length === 0) return m;
	const half = m.slice();
	solveLower(l, n, half, n);
	const turned = new Float64Array(n * n);
	for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) turned[j * n + i] = half[i * n + j]!;
	solveLower(l, n, turned, n);
	return turned;
}

/** The patterns of a design, in the order in which they are met. */
export function patternsOf(
	prepared: PreparedModel
): { occasions: Occasions; subjects: number[] }[] {
	const { design, layout } = prepared;
	const known = new Map<string, { occasions: Occasions; subjects: number[] }>();
	for (let s = 0; s + 1 < design.subjectStart.length; s++) {
		const occasions = occasionsOf(design, layout, s);
		const key = patternKey(layout, occasions);
		const found = known.get(key);
		if (found) found.subjects.push(s);
		else known.set(key, { occasions, subjects: [s] });
	}
	return [...known.values()];
}

export function whitenPattern(
	natural: NaturalModel,
	pattern: { occasions: Occasions; subjects: number[] }
): WhitenedPattern {
	const n = pattern.occasions.time.length;
	const at: Derivatives = natural.at(pattern.occasions);
	const factor = at.v;
	if (choleskyInPlace(factor, n) >= 0) {
		throw new StatsError(
			'singular-information',
			'The covariance of some subject’s outcomes is singular at the estimates, so degrees of freedom cannot be computed.'
		);
	}
	return {
		n,
		subjects: pattern.subjects,
		factor,
		first: at.first.map((m) => whitened(factor, n, m)),
		second: at.second.map(({ k, l, matrix }) => ({ k, l, matrix: whitened(factor, n, matrix) }))
	};
}
