import { subjectCovariance } from '../dependence/layout.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { solveLower, solveUpper } from '../numeric/dense.js';
import { inverseCovariance, type InverseCovariance } from './inverse-covariance.js';

/** A best linear unbiased prediction; outcome unit, per time unit for a slope. */
export interface PredictedEffect {
	estimate: number;
	/** With the coefficients taken as known. */
	conditionalSe: number;
	/** With their uncertainty. */
	predictionSe: number;
}

export interface SubjectEffects {
	subject: string;
	/** Level at time 0; null when the model has none. */
	level: PredictedEffect | null;
	slope: PredictedEffect | null;
}

export interface VisitEffect extends PredictedEffect {
	visit: string;
}

const effect = (estimate: number, conditional: number, mean: number): PredictedEffect => ({
	// Adding zero keeps a zero from being written as −0.
	estimate: estimate + 0,
	conditionalSe: Math.sqrt(Math.max(0, conditional)),
	predictionSe: Math.sqrt(Math.max(0, conditional) + Math.max(0, mean))
});

/** h'Ch. */
function form(h: Float64Array, c: Float64Array): number {
	const p = h.length;
	let sum = 0;
	for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) sum += h[i]! * c[i * p + j]! * h[j]!;
	return sum;
}

/**
 * How each subject differs lastingly from the mean of its like, in the order of `design.subjects`.
 *
 * b = GZ'V⁻¹(y − Xβ); conditional variance G − GZ'V⁻¹ZG, prediction variance G − GZ'PZG with
 * P = V⁻¹ − V⁻¹X(X'V⁻¹X)⁻¹X'V⁻¹; V includes shared visit effects. A component estimated as zero is predicted as zero.
 * The covariance is taken as known. Errors: `no-subject-effect`, `singular-information`.
 * Source: Robinson (1991), Statistical Science 6:15-32; Laird & Ware (1982), Biometrics 38:963-974.
 */
export function subjectEffects(
	fit: ModelFit,
	inverse: InverseCovariance = inverseCovariance(fit)
): SubjectEffects[] {
	const { design, layout, rows } = fit.prepared;
	const { q } = layout;
	if (q === 0)
		throw new StatsError(
			'no-subject-effect',
			'The model has no level or slope of subjects to predict.'
		);
	const { p } = design;
	const visits = design.visits.length;
	const g = subjectCovariance(layout, Float64Array.from(fit.working)).map((v) => v * fit.scale);
	const shift = layout.timeOrigin / layout.timeUnit;
	const slopeOnly = fit.dependence.subjectEffects === 'slope';
	// From effects on the inner time, (time − origin) / unit, to those on the data's own.
	const back = slopeOnly
		? [1 / layout.timeUnit]
		: q === 1
			? [1]
			: [1, -shift, 0, 1 / layout.timeUnit];
	return design.subjects.map((subject, s): SubjectEffects => {
		const { from, n, factor } = inverse.system(s);
		const z = rows.z.subarray(from * q, (from + n) * q);
		const zv = z.slice();
		solveLower(factor, n, zv, q);
		const middle = new Float64Array(q * q);
		for (let i = 0; i < n; i++)
			for (let a = 0; a < q; a++)
				for (let b = 0; b < q; b++) middle[a * q + b]! += zv[i * q + a]! * zv[i * q + b]!;
		if (inverse.visits) {
			solveUpper(factor, n, zv, q);
			for (let a = 0; a < q; a++)
				for (let b = 0; b < q; b++) {
					let taken = 0;
					for (let i = 0; i < n; i++)
						for (let k = 0; k < n; k++)
							taken +=
								zv[i * q + a]! *
								zv[k * q + b]! *
								inverse.visits.covariance[
									design.visit[from + i]! * visits + design.visit[from + k]!
								]!;
					middle[a * q + b]! -= taken;
				}
		}
		// T G Z' on the own scale, one row for each effect.
		const inner = { mean: new Float64Array(q), basis: new Float64Array(q * p) };
		for (let i = 0; i < n; i++)
			for (let a = 0; a < q; a++) {
				inner.mean[a]! += z[i * q + a]! * inverse.weighted[from + i]!;
				for (let j = 0; j < p; j++)
					inner.basis[a * p + j]! += z[i * q + a]! * inverse.weightedBasis[(from + i) * p + j]!;
			}
		const own = Array.from({ length: q }, (_, e) => {
			const tg = new Float64Array(q);
			let prior = 0;
			for (let a = 0; a < q; a++)
				for (let b = 0; b < q; b++) {
					tg[a]! += back[e * q + b]! * g[b * q + a]!;
					prior += back[e * q + a]! * g[a * q + b]! * back[e * q + b]!;
				}
			let estimate = 0;
			let known = 0;
			const h = new Float64Array(p);
			for (let a = 0; a < q; a++) {
				estimate += tg[a]! * inner.mean[a]!;
				for (let b = 0; b < q; b++) known += tg[a]! * middle[a * q + b]! * tg[b]!;
				for (let j = 0; j < p; j++) h[j]! += tg[a]! * inner.basis[a * p + j]!;
			}
			return effect(estimate, prior - known, form(h, fit.coordinateCovariance));
		});
		return slopeOnly
			? { subject, level: null, slope: own[0]! }
			: { subject, level: own[0]!, slope: own[1] ?? null };
	});
}

/**
 * By how much each visit moved everybody, in the order of `design.visits`; zeros when their variance is estimated as zero.
 *
 * v = σ²U'V⁻¹(y − Xβ), with the standard errors of `subjectEffects`. Errors: `bad-option`, `singular-information`.
 */
export function visitEffects(
	fit: ModelFit,
	{ visits }: InverseCovariance = inverseCovariance(fit)
): VisitEffect[] {
	const { design, rows } = fit.prepared;
	if (rows.visits === 0)
		throw new StatsError(
			'bad-option',
			'The model has no effects of visits shared by all to predict.'
		);
	const { p } = design;
	return design.visits.map((visit, v) => {
		if (!visits) return { visit, ...effect(0, 0, 0) };
		return {
			visit,
			...effect(
				visits.effects[v]!,
				visits.covariance[v * design.visits.length + v]!,
				form(visits.slopes.subarray(v * p, (v + 1) * p), fit.coordinateCovariance)
			)
		};
	});
}
