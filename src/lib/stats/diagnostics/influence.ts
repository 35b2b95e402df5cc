import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { invertPositive, solveLower } from '../numeric/dense.js';
import { toBasis } from '../numeric/orthonormal.js';
import { marginalResidualsOf, subjectSystems } from '../prediction/inverse-covariance.js';

/** A contrast without one subject, the covariance held as it was. */
export interface ContrastWithout {
	estimate: number;
	se: number;
	/** (estimate without − estimate) ÷ standard error of the whole. */
	shift: number;
}

export interface SubjectInfluence {
	subject: string;
	/** Cook-like distance: δ'(X'V⁻¹X)δ / p, δ the change of the coefficients; unitless. Null as `contrasts` may be. */
	distance: number | null;
	/** In the order asked; null when the rest of the data do not determine the coefficients. */
	contrasts: (ContrastWithout | null)[];
}

/**
 * What leaving out each subject in turn does to each contrast, by updating rather than refitting.
 *
 * `contrasts`: weights on the columns of X (`inside` of a contrast), each p long. The covariance parameters are held at
 * the estimates from all data, so that coefficients are those of a refit with them held, exactly: with
 * M = [X U]'B⁻¹[X U] (+ I/σ² for shared visit effects), M_s and g_s its subject's part and score, δ = −(M − M_s)⁻¹g_s. What a
 * subject does to the variances is not in it. Cost (p + visits)³ for each subject.
 * Errors: `shape-mismatch`, `singular-information`.
 * Source: Christensen, Pearson & Johnson (1992), Technometrics 34:38-45; Cook (1977), Technometrics 19:15-18.
 */
export function subjectInfluence(
	fit: ModelFit,
	contrasts: readonly (readonly number[])[]
): SubjectInfluence[] {
	const { design, rows, basis } = fit.prepared;
	const { p } = design;
	const wrong = contrasts.find((w) => w.length !== p);
	if (wrong)
		throw new StatsError(
			'shape-mismatch',
			`The contrast has ${wrong.length} weights for ${p} coefficients.`,
			{ weights: wrong.length, coefficients: p }
		);
	const variance = fit.natural.visitRatio * fit.scale;
	const visits = rows.visits > 0 && variance > 0 ? design.visits.length : 0;
	const k = p + visits;
	const width = k + 1;
	const system = subjectSystems(fit);
	const residual = marginalResidualsOf(fit);
	/** [Q U r]'B⁻¹[Q U r] of one subject, (k + 1) × (k + 1). */
	const momentsOf = (s: number): Float64Array => {
		const { from, n, factor } = system(s);
		const part = new Float64Array(n * width);
		for (let i = 0; i < n; i++) {
			for (let j = 0; j < p; j++) part[i * width + j] = rows.a[(from + i) * rows.c + j]!;
			if (visits > 0) part[i * width + p + design.visit[from + i]!] = 1;
			part[i * width + k] = residual[from + i]!;
		}
		solveLower(factor, n, part, width);
		const m = new Float64Array(width * width);
		for (let i = 0; i < n; i++)
			for (let a = 0; a < width; a++) {
				const f = part[i * width + a]!;
				if (f !== 0) for (let b = 0; b < width; b++) m[a * width + b]! += f * part[i * width + b]!;
			}
		return m;
	};
	const whole = new Float64Array(k * k);
	const scores = new Float64Array(k);
	const moments = design.subjects.map((_, s) => {
		const m = momentsOf(s);
		for (let a = 0; a < k; a++) {
			for (let b = 0; b < k; b++) whole[a * k + b]! += m[a * width + b]!;
			scores[a]! += m[a * width + k]!;
		}
		return m;
	});
	for (let v = p; v < k; v++) whole[v * k + v]! += 1 / variance;
	const found = invertPositive(whole, k);
	if (!found)
		throw new StatsError(
			'singular-information',
			'The coefficients cannot be told apart at these variances, so no influence can be worked out.'
		);
	// Effects at the estimates of all: nothing for the coefficients, the predictions for the visits.
	const effects = new Float64Array(k);
	for (let a = 0; a < k; a++)
		for (let b = 0; b < k; b++) effects[a]! += found.inverse[a * k + b]! * scores[b]!;
	const asked = contrasts.map((w) => {
		const inside = toBasis(basis, w);
		const se = Math.sqrt(form(inside, fit.coordinateCovariance, p, p));
		const estimate = inside.reduce((sum, v, j) => sum + v * fit.coordinates[j]!, 0);
		return { inside, se, estimate };
	});
	const precision = invertPositive(fit.coordinateCovariance, p);
	return design.subjects.map((subject, s): SubjectInfluence => {
		const m = moments[s]!;
		const rest = new Float64Array(k * k);
		const score = new Float64Array(k);
		for (let a = 0; a < k; a++) {
			score[a] = m[a * width + k]!;
			for (let b = 0; b < k; b++) {
				rest[a * k + b] = whole[a * k + b]! - m[a * width + b]!;
				score[a]! -= m[a * width + b]! * effects[b]!;
			}
		}
		const without = determined(rest, whole, k) ? invertPositive(rest, k) : null;
		if (!without || !precision)
			return { subject, distance: null, contrasts: contrasts.map(() => null) };
		const change = new Float64Array(p);
		for (let a = 0; a < p; a++)
			for (let b = 0; b < k; b++) change[a]! -= without.inverse[a * k + b]! * score[b]!;
		return {
			subject,
			distance: form(change, precision.inverse, p, p) / p,
			contrasts: asked.map(({ inside, se, estimate }) => {
				const moved = inside.reduce((sum, v, j) => sum + v * change[j]!, 0);
				return {
					estimate: estimate + moved,
					se: Math.sqrt(form(inside, without.inverse, p, k)),
					shift: moved / se
				};
			})
		};
	});
}

/** w'Aw for the leading p × p of A, whose rows are `width` long. */
function form(w: ArrayLike<number>, a: Float64Array, p: number, width: number): number {
	let sum = 0;
	for (let i = 0; i < p; i++) for (let j = 0; j < p; j++) sum += w[i]! * a[i * width + j]! * w[j]!;
	return sum;
}

/** Whether what is left has its own information on everything: no pivot that is only rounding of the whole. */
function determined(rest: Float64Array, whole: Float64Array, k: number): boolean {
	const l = rest.slice();
	for (let j = 0; j < k; j++) {
		let d = l[j * k + j]!;
		for (let h = 0; h < j; h++) d -= l[j * k + h]! ** 2;
		if (!(d > 1e-10 * whole[j * k + j]!)) return false;
		const root = Math.sqrt(d);
		l[j * k + j] = root;
		for (let i = j + 1; i < k; i++) {
			let v = l[i * k + j]!;
			for (let h = 0; h < j; h++) v -= l[i * k + h]! * l[j * k + h]!;
			l[i * k + j] = v / root;
		}
	}
	return true;
}
