import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { studentQuantile, studentTwoSidedP } from '../numeric/distribution.js';
import { toBasis, toCoefficients } from '../numeric/orthonormal.js';
import type { DegreesOfFreedomRule } from '../plan.js';
import type { TestedEstimate } from '../types.js';
import { covarianceFrom, curvatureAt } from './fit-curvature.js';
import {
	fisherTail,
	jointKenwardRoger,
	jointSatterthwaite,
	waldOf,
	type JointTest
} from './joint-test.js';

/** How precise the coefficients of a fit are by one rule; not for JSON, but what it returns is. */
export interface Precision {
	rule: DegreesOfFreedomRule;
	/** Behind the standard errors: adjusted for Kenward–Roger. */
	covariance: number[][];
	se: number[];
	/** Estimate, se, df, t, p and interval of Σ weights · β; `weights` p long. */
	test(weights: readonly number[], confidence?: number): TestedEstimate;
	/** Rows of weights, each p long, none a combination of the others. */
	testJointly(rows: readonly (readonly number[])[]): JointTest;
	warnings: string[];
}

const dot = (a: ArrayLike<number>, b: ArrayLike<number>) => {
	let sum = 0;
	for (let i = 0; i < a.length; i++) sum += a[i]! * b[i]!;
	return sum;
};

/**
 * The rule by which standard errors and degrees of freedom of a fit are made.
 *
 * - `kenward-roger`: adjusted covariance and F scale, second derivatives of V kept; REML only.
 *   Source: Kenward & Roger (1997), Biometrics 53:983-997.
 * - `satterthwaite`: unadjusted; from the observed information. Source: Giesbrecht & Burns (1985), Biometrics
 *   41:477-486; Fai & Cornelius (1996), J Stat Comput Simul 54:363-378.
 * - `naive`: unadjusted; rows − coefficients.
 * With a component at its edge the first two are those of the model without it, and `warnings` says so.
 * Errors: `kenward-roger-needs-reml`, `singular-information`; of a test `shape-mismatch`, `bad-option`, `out-of-range`.
 */
export function precisionOf(fit: ModelFit, rule: DegreesOfFreedomRule): Precision {
	const { prepared, scale } = fit;
	const { basis, design } = prepared;
	const p = design.p;
	if (rule === 'kenward-roger' && fit.method !== 'reml') {
		throw new StatsError(
			'kenward-roger-needs-reml',
			'Kenward–Roger degrees of freedom are defined for REML only. Fit by REML, or use Satterthwaite.'
		);
	}
	const curvature = rule === 'naive' ? null : curvatureAt(fit);
	const turn = curvature?.turn;
	const hat = (weights: readonly number[]): Float64Array => {
		const w = toBasis(basis, weights);
		const out = new Float64Array(p);
		for (let j = 0; j < p; j++) for (let i = j; i < p; i++) out[j]! += turn![i * p + j]! * w[i]!;
		return out;
	};
	const plainVariance = (weights: readonly number[]) => {
		const w = toBasis(basis, weights);
		let sum = 0;
		for (let i = 0; i < p; i++)
			for (let j = 0; j < p; j++) sum += w[i]! * fit.coordinateCovariance[i * p + j]! * w[j]!;
		return sum;
	};
	let spread = new Float64Array(0);
	let adjusted: Float64Array | null = null;
	if (curvature) {
		const { sums } = curvature;
		const { count } = sums;
		const singularEdge = fit.boundary.includes('level–slope correlation');
		spread = covarianceFrom(
			rule === 'kenward-roger' || singularEdge ? curvature.expected : curvature.observed,
			count
		) as Float64Array<ArrayBuffer>;
		if (rule === 'kenward-roger') {
			const middle = sums.weighted(spread);
			const c = p + 1;
			for (let k = 0; k < count; k++)
				for (let l = 0; l < count; l++) {
					const w = spread[k * count + l]!;
					for (let i = 0; i < p; i++)
						for (let j = 0; j < p; j++) {
							let sum = 0;
							for (let h = 0; h < p; h++)
								sum += sums.first[k]![i * c + h]! * sums.first[l]![h * c + j]!;
							middle[i * p + j]! -= w * sum;
						}
				}
			adjusted = new Float64Array(p * p);
			for (let i = 0; i < p; i++)
				for (let j = 0; j < p; j++)
					adjusted[i * p + j] = (i === j ? 1 : 0) + middle[i * p + j]! + middle[j * p + i]!;
		}
	}
	const adjustedForm = (a: Float64Array, b: Float64Array) => {
		if (!adjusted) return dot(a, b);
		let sum = 0;
		for (let i = 0; i < p; i++)
			for (let j = 0; j < p; j++) sum += a[i]! * adjusted[i * p + j]! * b[j]!;
		return sum;
	};
	const slopes = (w: Float64Array) =>
		curvature!.sums.first.map((f) => {
			let sum = 0;
			for (let i = 0; i < p; i++)
				for (let j = 0; j < p; j++) sum += w[i]! * f[i * (p + 1) + j]! * w[j]!;
			return sum;
		});
	const singleDf = (w: Float64Array) => {
		const g = slopes(w);
		let sum = 0;
		g.forEach((a, k) => g.forEach((b, l) => (sum += a * spread[k * g.length + l]! * b)));
		return (2 * dot(w, w) ** 2) / sum;
	};
	const check = (weights: readonly number[]) => {
		if (weights.length !== p) {
			throw new StatsError(
				'shape-mismatch',
				`The contrast has ${weights.length} weights for ${p} coefficients.`,
				{ weights: weights.length, coefficients: p }
			);
		}
		if (!weights.every(Number.isFinite))
			throw new StatsError('not-finite', 'A weight of the contrast is not a finite number.');
		if (weights.every((w) => w === 0))
			throw new StatsError('bad-option', 'Every weight of the contrast is zero.');
	};
	const estimateOf = (weights: readonly number[]) => dot(toBasis(basis, weights), fit.coordinates);
	const outOfRange = (): never => {
		throw new StatsError('out-of-range', 'The contrast is too large or too small to be tested.');
	};

	const covariance = adjusted ? backToCoefficients(fit, turn!, adjusted) : fit.vcov;
	return {
		rule,
		covariance,
		se: covariance.map((row, i) => Math.sqrt(row[i]!)),
		warnings: rule === 'naive' ? [] : fit.warnings,
		test(weights, confidence = 0.95) {
			check(weights);
			const estimate = estimateOf(weights);
			let variance = plainVariance(weights);
			let df = design.n - p;
			if (curvature) {
				const w = hat(weights);
				df = singleDf(w);
				variance = scale * adjustedForm(w, w);
			}
			if (curvature && !(variance > 0 && df > 0)) {
				throw new StatsError(
					'singular-information',
					'The data tell too little of the covariance to correct this test for it. Ask for naive degrees of freedom, or for a simpler dependence.'
				);
			}
			const standardError = Math.sqrt(variance);
			const t = estimate / standardError;
			if (![t, df].every(Number.isFinite) || !(standardError > 0)) outOfRange();
			const reach = studentQuantile(confidence, df) * standardError;
			if (!Number.isFinite(reach)) outOfRange();
			return {
				estimate,
				standardError,
				df,
				t,
				p: studentTwoSidedP(t, df),
				lower: estimate - reach,
				upper: estimate + reach
			};
		},
		testJointly(rows) {
			rows.forEach(check);
			const q = rows.length;
			if (q === 0)
				throw new StatsError('bad-option', 'A joint test needs at least one row of weights.');
			const estimate = rows.map(estimateOf);
			if (!curvature) {
				const v = new Float64Array(q * q);
				const bases = rows.map((r) => toBasis(basis, r));
				bases.forEach((a, i) =>
					bases.forEach((b, j) => {
						for (let h = 0; h < p; h++)
							for (let g = 0; g < p; g++)
								v[i * q + j]! += a[h]! * fit.coordinateCovariance[h * p + g]! * b[g]!;
					})
				);
				const f = waldOf(estimate, v) / q;
				const df = design.n - p;
				return { numeratorDf: q, denominatorDf: df, scaling: 1, f, p: fisherTail(f, q, df) };
			}
			const w = rows.map(hat);
			const form = (of: (a: Float64Array, b: Float64Array) => number) => {
				const m = new Float64Array(q * q);
				w.forEach((a, i) => w.forEach((b, j) => (m[i * q + j] = scale * of(a, b))));
				return m;
			};
			if (rule === 'satterthwaite') return jointSatterthwaite(estimate, w, form(dot), singleDf);
			return jointKenwardRoger(estimate, w, form(adjustedForm), curvature.sums, spread);
		}
	};
}

/** σ² R⁻¹ L A L' R⁻ᵀ for A in X̂. */
function backToCoefficients(fit: ModelFit, turn: Float64Array, a: Float64Array): number[][] {
	const { basis, design } = fit.prepared;
	const p = design.p;
	const inBasis = (v: Float64Array) => {
		const out = new Float64Array(p);
		for (let i = 0; i < p; i++) for (let j = 0; j <= i; j++) out[i]! += turn[i * p + j]! * v[j]!;
		return out;
	};
	const rows = Array.from({ length: p }, (_, i) =>
		toCoefficients(basis, inBasis(a.slice(i * p, (i + 1) * p)))
	);
	const both = Array.from({ length: p }, (_, j) =>
		toCoefficients(basis, inBasis(Float64Array.from(rows, (row) => row[j]!)))
	);
	return both.map((row, i) => row.map((v, j) => (fit.scale * (v + both[j]![i]!)) / 2));
}
