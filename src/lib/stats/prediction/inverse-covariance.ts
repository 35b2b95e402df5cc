import { occasionsOf, patternKey, type Occasions } from '../dependence/occasions.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { choleskyInPlace, invertPositive, solveLower, solveUpper } from '../numeric/dense.js';

/** One subject's rows and the covariance of its outcomes, shared visit effects left out; outcome unit squared. */
export interface SubjectSystem {
	from: number;
	n: number;
	occasions: Occasions;
	/** n × n. */
	covariance: Float64Array;
	/** Its lower Cholesky factor; what stands above the diagonal means nothing. */
	factor: Float64Array;
}

/** Patterns kept at most: data in which every subject has its own times do not fill the memory. */
const KEPT = 2000;

/**
 * The covariance of each subject by position, one factor for each pattern of occasions.
 * Errors of what comes back: `singular-information`.
 */
export function subjectSystems(fit: ModelFit): (subject: number) => SubjectSystem {
	const { design, layout } = fit.prepared;
	const known = new Map<string, Pick<SubjectSystem, 'covariance' | 'factor'>>();
	return (subject) => {
		const occasions = occasionsOf(design, layout, subject);
		const n = occasions.time.length;
		const key = patternKey(layout, occasions);
		let found = known.get(key);
		if (!found) {
			const covariance = fit.natural.covariance(occasions).map((v) => v * fit.scale);
			const factor = covariance.slice();
			if (choleskyInPlace(factor, n) >= 0)
				throw new StatsError(
					'singular-information',
					`The covariance of the outcomes of subject “${design.subjects[subject]}” is singular at the estimates, so nothing can be predicted from them.`,
					{ subject: design.subjects[subject]! }
				);
			found = { covariance, factor };
			if (known.size < KEPT) known.set(key, found);
		}
		return { from: design.subjectStart[subject]!, n, occasions, ...found };
	};
}

/** What the inverse of the covariance of all outcomes does to residuals and mean. */
export interface InverseCovariance {
	system: (subject: number) => SubjectSystem;
	/** y − Xβ; n long. */
	residual: Float64Array;
	/** V⁻¹(y − Xβ), visit effects in V. */
	weighted: Float64Array;
	/** V⁻¹Q, n × p row-major, for the orthonormal columns Q. */
	weightedBasis: Float64Array;
	/** Best linear unbiased predictions of the shared visit effects; null without them or when their variance is zero. */
	visits: {
		effects: Float64Array;
		/** (I/σ² + U'B⁻¹U)⁻¹, T × T: their covariance given the outcomes, coefficients taken as known. */
		covariance: Float64Array;
		/** Covariance of effects and coordinates: each row is a visit's V⁻¹-weighted mean row times σ²; T × p. */
		slopes: Float64Array;
	} | null;
}

/** y − Xβ for each row of the design; n long, outcome unit. */
export function marginalResidualsOf({ prepared, coordinates }: ModelFit): Float64Array {
	const { rows, design, leastSquares } = prepared;
	const { c } = rows;
	const shift = leastSquares.map((value, j) => coordinates[j]! - value);
	return Float64Array.from({ length: design.n }, (_, i) => {
		let r = rows.a[i * c + design.p]!;
		for (let j = 0; j < design.p; j++) r -= rows.a[i * c + j]! * shift[j]!;
		return r;
	});
}

/**
 * V⁻¹ on residuals and mean, subject by subject; visit effects by Woodbury on visits × visits.
 *
 * With B the covariance of subjects apart and U the visits' indicators, V = B + σ²UU' and
 * V⁻¹ = B⁻¹ − B⁻¹U(I/σ² + U'B⁻¹U)⁻¹U'B⁻¹. Errors: `singular-information`.
 */
export function inverseCovariance(fit: ModelFit): InverseCovariance {
	const { design, rows } = fit.prepared;
	const { n, p } = design;
	const system = subjectSystems(fit);
	const residual = marginalResidualsOf(fit);
	const width = p + 1;
	const solved = new Float64Array(n * width);
	const visits = design.visits.length;
	const variance = fit.natural.visitRatio * fit.scale;
	const crossed = rows.visits > 0 && variance > 0;
	const middle = new Float64Array(crossed ? visits * visits : 0);
	// U'B⁻¹[r, Q]
	const sums = new Float64Array(crossed ? visits * width : 0);
	const spreads: { from: number; size: number; own: Float64Array }[] = [];
	for (let s = 0; s + 1 < design.subjectStart.length; s++) {
		const { from, n: size, factor } = system(s);
		const part = solved.subarray(from * width, (from + size) * width);
		for (let i = 0; i < size; i++) {
			part[i * width] = residual[from + i]!;
			for (let j = 0; j < p; j++) part[i * width + 1 + j] = rows.a[(from + i) * rows.c + j]!;
		}
		solveLower(factor, size, part, width);
		solveUpper(factor, size, part, width);
		if (!crossed) continue;
		// B⁻¹U, by the visits this subject came to.
		const own = new Float64Array(size * visits);
		for (let i = 0; i < size; i++) own[i * visits + design.visit[from + i]!] = 1;
		solveLower(factor, size, own, visits);
		solveUpper(factor, size, own, visits);
		spreads.push({ from, size, own });
		for (let i = 0; i < size; i++) {
			const v = design.visit[from + i]!;
			for (let w = 0; w < visits; w++) middle[v * visits + w]! += own[i * visits + w]!;
			for (let j = 0; j < width; j++) sums[v * width + j]! += part[i * width + j]!;
		}
	}
	let found: InverseCovariance['visits'] = null;
	if (crossed) {
		for (let v = 0; v < visits; v++) middle[v * visits + v]! += 1 / variance;
		const inverse = invertPositive(middle, visits);
		if (!inverse)
			throw new StatsError(
				'singular-information',
				'The shared visit effects cannot be told from one another, so they cannot be predicted.'
			);
		const covariance = inverse.inverse;
		const moved = new Float64Array(visits * width);
		for (let v = 0; v < visits; v++)
			for (let w = 0; w < visits; w++)
				for (let j = 0; j < width; j++)
					moved[v * width + j]! += covariance[v * visits + w]! * sums[w * width + j]!;
		for (const { from, size, own } of spreads)
			for (let i = 0; i < size; i++)
				for (let v = 0; v < visits; v++) {
					const f = own[i * visits + v]!;
					if (f === 0) continue;
					for (let j = 0; j < width; j++)
						solved[(from + i) * width + j]! -= f * moved[v * width + j]!;
				}
		// σ²U'V⁻¹ = (I/σ² + U'B⁻¹U)⁻¹U'B⁻¹, so these are predictions as they stand.
		found = {
			effects: Float64Array.from({ length: visits }, (_, v) => moved[v * width]!),
			covariance,
			slopes: Float64Array.from(
				{ length: visits * p },
				(_, at) => moved[Math.floor(at / p) * width + 1 + (at % p)]!
			)
		};
	}
	const weighted = new Float64Array(n);
	const weightedBasis = new Float64Array(n * p);
	for (let i = 0; i < n; i++) {
		weighted[i] = solved[i * width]!;
		for (let j = 0; j < p; j++) weightedBasis[i * p + j] = solved[i * width + 1 + j]!;
	}
	return { system, residual, weighted, weightedBasis, visits: found };
}
