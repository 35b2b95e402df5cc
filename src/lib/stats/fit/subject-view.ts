import { occasionsOf, patternKey } from '../dependence/occasions.js';
import { subjectCovariance } from '../dependence/layout.js';
import { StatsError } from '../errors.js';
import { choleskyInPlace } from '../numeric/dense.js';
import type { ModelFit } from './fit-model.js';

/** What the model says of one subject's rows, for prediction, residuals and simulation; outcome unit. */
export interface SubjectView {
	/** Rows of the subject: `from` up to, not including, `to`. */
	from: number;
	to: number;
	/** Covariance of its outcomes, n × n row-major, subject effects in it and shared visit effects not. */
	covariance: Float64Array;
	/** n × q: the inner time, (time − origin) / unit, beside the level. */
	z: Float64Array;
	/** Covariance of the subject effects on the inner time, q × q. */
	effects: Float64Array;
}

/** Errors: `shape-mismatch` for a subject the design does not have. */
export function covarianceOf(fit: ModelFit, subject: number): SubjectView {
	const { prepared, natural, scale } = fit;
	const { design, layout, rows } = prepared;
	if (!(subject >= 0 && subject < design.subjectStart.length - 1)) {
		throw new StatsError('shape-mismatch', `The design has no subject at position ${subject}.`, {
			subject
		});
	}
	const from = design.subjectStart[subject]!;
	const to = design.subjectStart[subject + 1]!;
	const v = natural.covariance(occasionsOf(design, layout, subject));
	return {
		from,
		to,
		covariance: v.map((f) => f * scale),
		z: rows.z.slice(from * rows.q, to * rows.q),
		effects: subjectCovariance(layout, Float64Array.from(fit.working)).map((f) => f * scale)
	};
}

/** Variance of the shared visit effects, outcome unit squared; 0 without them. */
export const visitVarianceOf = (fit: ModelFit): number => fit.natural.visitRatio * fit.scale;

/** The fitted mean of every row, Xβ, by the orthonormal basis; n long. */
export function fittedMean(fit: ModelFit): Float64Array {
	const { rows, design } = fit.prepared;
	const mean = new Float64Array(design.n);
	for (let i = 0; i < design.n; i++) {
		let sum = 0;
		for (let j = 0; j < design.p; j++) sum += rows.a[i * rows.c + j]! * fit.coordinates[j]!;
		mean[i] = sum;
	}
	return mean;
}

/**
 * Draws outcomes from a fit: each call of what comes back is a new y, n long, on the analysed scale.
 *
 * `normal` gives standard normal numbers; the same stream gives the same outcomes. Subjects by the Cholesky factor of
 * their covariance, one for each pattern, then one number for each visit. Errors: `singular-information`.
 */
export function outcomeDrawer(fit: ModelFit): (normal: () => number) => Float64Array {
	const { design, layout } = fit.prepared;
	const mean = fittedMean(fit);
	const factors = new Map<string, Float64Array>();
	const own: Float64Array[] = [];
	for (let s = 0; s + 1 < design.subjectStart.length; s++) {
		const occasions = occasionsOf(design, layout, s);
		const key = patternKey(layout, occasions);
		let factor = factors.get(key);
		if (!factor) {
			factor = fit.natural.covariance(occasions).map((f) => f * fit.scale);
			if (choleskyInPlace(factor, occasions.time.length) >= 0) {
				throw new StatsError(
					'singular-information',
					'The covariance of some subject’s outcomes is singular at the estimates, so no outcomes can be drawn.'
				);
			}
			factors.set(key, factor);
		}
		own.push(factor);
	}
	const visitDeviation = Math.sqrt(visitVarianceOf(fit));
	const most = layout.mostPerSubject;
	return (normal) => {
		const y = mean.slice();
		const e = new Float64Array(most);
		own.forEach((factor, s) => {
			const from = design.subjectStart[s]!;
			const n = design.subjectStart[s + 1]! - from;
			for (let i = 0; i < n; i++) {
				e[i] = normal();
				let sum = 0;
				for (let j = 0; j <= i; j++) sum += factor[i * n + j]! * e[j]!;
				y[from + i]! += sum;
			}
		});
		if (visitDeviation > 0) {
			const shared = design.visits.map(() => visitDeviation * normal());
			for (let i = 0; i < design.n; i++) y[i]! += shared[design.visit[i]!]!;
		}
		return y;
	};
}
