import { occasionsOf } from '../dependence/occasions.js';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { choleskyInPlace, invertPositive, solveLower, solveUpper } from '../numeric/dense.js';

/** Errors: `singular-information`. */
function factorOf(a: Float64Array, n: number): Float64Array {
	if (choleskyInPlace(a, n) < 0) return a;
	throw new StatsError(
		'singular-information',
		'The covariance of some subject’s outcomes is singular at the estimates, so missing ones cannot be drawn.'
	);
}

/** Xβ of the rows of a design. */
function meanOf(design: ModelDesign, beta: readonly number[]): Float64Array {
	const mean = new Float64Array(design.n);
	for (let j = 0; j < design.p; j++)
		for (let i = 0; i < design.n; i++) mean[i]! += design.x[j * design.n + i]! * beta[j]!;
	return mean;
}

/**
 * The outcomes of `design` with those marked in `missing` drawn from their distribution given all others, n long.
 *
 * `fit` gives coefficients and covariance: those of a fit to the rows not marked, or a draw of them; its columns are those of
 * `design`. Shared visit effects are drawn first, given every observed outcome; then each subject's missing outcomes, jointly,
 * given its own observed ones. Errors: `singular-information`.
 * Source: the conditional normal distribution; Little & Rubin (2019), Statistical Analysis with Missing Data, chapter 10.
 */
export function drawMissing(
	design: ModelDesign,
	missing: Uint8Array,
	fit: Pick<ModelFit, 'natural' | 'scale' | 'beta' | 'prepared'>,
	normal: () => number
): Float64Array {
	const { natural, scale, prepared } = fit;
	const { layout } = prepared;
	const y = design.y.slice();
	const mean = meanOf(design, fit.beta);
	const subjects = design.subjects.length;
	const parts = Array.from({ length: subjects }, (_, s) => {
		const from = design.subjectStart[s]!;
		const n = design.subjectStart[s + 1]! - from;
		const seen: number[] = [];
		const lost: number[] = [];
		for (let i = 0; i < n; i++) (missing[from + i] ? lost : seen).push(i);
		return { from, n, seen, lost };
	});
	const variance = natural.visitRatio * scale;
	const visits = design.visits.length;
	const covarianceOf = (s: number) =>
		natural.covariance(occasionsOf(design, layout, s)).map((v) => v * scale);
	const seenFactor = (v: Float64Array, n: number, seen: readonly number[]) => {
		const a = new Float64Array(seen.length ** 2);
		seen.forEach((i, k) => seen.forEach((j, l) => (a[k * seen.length + l] = v[i * n + j]!)));
		return factorOf(a, seen.length);
	};
	if (variance > 0) {
		const middle = new Float64Array(visits * visits);
		const sums = new Float64Array(visits);
		parts.forEach(({ from, n, seen }, s) => {
			const m = seen.length;
			if (m === 0) return;
			const factor = seenFactor(covarianceOf(s), n, seen);
			const width = visits + 1;
			const b = new Float64Array(m * width);
			seen.forEach((i, k) => {
				b[k * width + design.visit[from + i]!] = 1;
				b[k * width + visits] = y[from + i]! - mean[from + i]!;
			});
			solveLower(factor, m, b, width);
			solveUpper(factor, m, b, width);
			seen.forEach((i, k) => {
				const v = design.visit[from + i]!;
				for (let w = 0; w < visits; w++) middle[v * visits + w]! += b[k * width + w]!;
				sums[v]! += b[k * width + visits]!;
			});
		});
		for (let v = 0; v < visits; v++) middle[v * visits + v]! += 1 / variance;
		const inverse = invertPositive(middle, visits)?.inverse;
		if (!inverse)
			throw new StatsError(
				'singular-information',
				'The shared visit effects cannot be told from one another, so missing outcomes cannot be drawn.'
			);
		const factor = factorOf(inverse.slice(), visits);
		const z = Float64Array.from({ length: visits }, normal);
		const effects = Float64Array.from({ length: visits }, (_, v) => {
			let effect = 0;
			for (let w = 0; w < visits; w++) effect += inverse[v * visits + w]! * sums[w]!;
			for (let w = 0; w <= v; w++) effect += factor[v * visits + w]! * z[w]!;
			return effect;
		});
		for (let i = 0; i < design.n; i++) mean[i]! += effects[design.visit[i]!]!;
	}
	parts.forEach(({ from, n, seen, lost }, s) => {
		const [m, h] = [seen.length, lost.length];
		if (h === 0) return;
		const v = covarianceOf(s);
		// L⁻¹[V_seen,lost, y − Xβ] of the seen.
		const width = h + 1;
		const b = new Float64Array(m * width);
		if (m > 0) {
			const factor = seenFactor(v, n, seen);
			seen.forEach((i, k) => {
				lost.forEach((j, l) => (b[k * width + l] = v[i * n + j]!));
				b[k * width + h] = y[from + i]! - mean[from + i]!;
			});
			solveLower(factor, m, b, width);
		}
		const open = new Float64Array(h * h);
		const centre = lost.map((i) => mean[from + i]!);
		for (let a = 0; a < h; a++) {
			for (let c = 0; c < h; c++) {
				let taken = 0;
				for (let k = 0; k < m; k++) taken += b[k * width + a]! * b[k * width + c]!;
				open[a * h + c] = v[lost[a]! * n + lost[c]!]! - taken;
			}
			for (let k = 0; k < m; k++) centre[a]! += b[k * width + a]! * b[k * width + h]!;
		}
		const factor = factorOf(open, h);
		const z = lost.map(normal);
		lost.forEach((i, a) => {
			let value = centre[a]!;
			for (let c = 0; c <= a; c++) value += factor[a * h + c]! * z[c]!;
			y[from + i] = value;
		});
	});
	return y;
}
