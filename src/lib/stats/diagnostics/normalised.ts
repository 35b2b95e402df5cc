import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import type { ModelFit } from '../fit/fit-model.js';
import { solveLower } from '../numeric/dense.js';
import { subjectSystems, type SubjectSystem } from '../prediction/inverse-covariance.js';

/** What turns residuals of a fit into normalised ones; made once, then used on any residuals of these rows. */
export type Normaliser = (residual: Float64Array) => Float64Array;

/**
 * Residuals freed of their covariance: with V as estimated they are independent with variance 1 but for what estimating the
 * mean takes away; unitless, n long.
 *
 * Without visit effects in the order of each subject's rows: L⁻¹r with LL' the covariance of its outcomes. With them, by
 * W = L⁻¹U over all subjects, (I + σ²WW')^(−1/2) follows by the eigenvectors of W'W: every row gives up its share of what its
 * visit did to all. Errors: `singular-information`.
 */
export function normaliser(fit: ModelFit): Normaliser {
	const { design, rows } = fit.prepared;
	const system = subjectSystems(fit);
	const systems: SubjectSystem[] = design.subjects.map((_, s) => system(s));
	const whiten = (values: Float64Array, width: number) => {
		for (const { from, n, factor } of systems)
			solveLower(factor, n, values.subarray(from * width, (from + n) * width), width);
		return values;
	};
	const variance = fit.natural.visitRatio * fit.scale;
	if (rows.visits === 0 || variance === 0) return (residual) => whiten(residual.slice(), 1);
	const visits = design.visits.length;
	const w = new Float64Array(design.n * visits);
	for (let i = 0; i < design.n; i++) w[i * visits + design.visit[i]!] = 1;
	whiten(w, visits);
	const square = new Matrix(visits, visits);
	for (let a = 0; a < visits; a++)
		for (let b = 0; b < visits; b++) {
			let sum = 0;
			for (let i = 0; i < design.n; i++) sum += w[i * visits + a]! * w[i * visits + b]!;
			square.set(a, b, sum);
		}
	const { realEigenvalues: values, eigenvectorMatrix: vectors } = new EigenvalueDecomposition(
		square,
		{ assumeSymmetric: true }
	);
	// ((1 + σ²λ)^(−1/2) − 1) / λ, without its cancellation.
	const gains = values.map((lambda) => {
		const root = Math.sqrt(1 + variance * Math.max(0, lambda));
		return -variance / (root * (1 + root));
	});
	return (residual) => {
		const r = whiten(residual.slice(), 1);
		const sums = new Float64Array(visits);
		for (let i = 0; i < design.n; i++)
			for (let v = 0; v < visits; v++) sums[v]! += w[i * visits + v]! * r[i]!;
		const moved = new Float64Array(visits);
		for (let k = 0; k < visits; k++) {
			let along = 0;
			for (let v = 0; v < visits; v++) along += vectors.get(v, k) * sums[v]!;
			for (let v = 0; v < visits; v++) moved[v]! += vectors.get(v, k) * gains[k]! * along;
		}
		for (let i = 0; i < design.n; i++)
			for (let v = 0; v < visits; v++) r[i]! += w[i * visits + v]! * moved[v]!;
		return r;
	};
}
