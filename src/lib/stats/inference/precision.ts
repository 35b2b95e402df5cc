import { EigenvalueDecomposition, Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { invertPositive, inner } from '../numeric/dense.js';
import { choleskyInPlace } from '../numeric/dense.js';
import { incompleteBeta } from '../numeric/incomplete-beta.js';
import { toBasis, toCoefficients } from '../numeric/orthonormal.js';
import { studentQuantile, studentTwoSidedP } from '../numeric/distribution.js';
import type { DegreesOfFreedomRule } from '../plan.js';
import type { TestedEstimate } from '../types.js';
import type { CurvatureSums } from './curvature-sums.js';
import { sumsCrossed } from './sums-crossed.js';
import { sumsWithin } from './sums-within.js';

/** Curvature of a fit: made once, then asked by Kenward–Roger, Satterthwaite and the tests of the engine. */
export interface FitCurvature {
	sums: CurvatureSums;
	/** Lower factor of the covariance of the basis coordinates ÷ σ²: from the basis to X̂. */
	turn: Float64Array;
	/** Names of the parameters, in the order of the sums; φ for `range`; subject effects on the inner time. */
	names: string[];
	/** ∂(−2 log-likelihood) in each, and its second derivatives (K × K); in units of σ². */
	slope: Float64Array;
	observed: Float64Array;
	/** tr(PV_kPV_l), K × K: twice the expected information under REML. */
	expected: Float64Array;
}

/** Errors: `singular-information`. */
export function curvatureAt(fit: ModelFit): FitCurvature {
	const { prepared, natural, method } = fit;
	const { rows, design } = prepared;
	const p = design.p;
	const turn = fit.coordinateCovariance.map((v) => v / fit.scale);
	if (choleskyInPlace(turn, p) >= 0) refuseSingular();
	for (let i = 0; i < p; i++) for (let j = i + 1; j < p; j++) turn[i * p + j] = 0;
	const root = Math.sqrt(fit.scale);
	const residual = new Float64Array(design.n);
	const shift = prepared.leastSquares.map((c, j) => fit.coordinates[j]! - c);
	for (let i = 0; i < design.n; i++) {
		let r = rows.a[i * rows.c + p]!;
		for (let j = 0; j < p; j++) r -= rows.a[i * rows.c + j]! * shift[j]!;
		residual[i] = r / root;
	}
	const make = rows.visits > 0 && natural.visitRatio > 0 ? sumsCrossed : sumsWithin;
	const sums = make(prepared, natural, turn, residual);
	const { count } = sums;
	const c = p + 1;
	const slope = new Float64Array(count);
	const observed = new Float64Array(count * count);
	const expected = new Float64Array(count * count);
	const reml = method === 'reml';
	for (let k = 0; k < count; k++) {
		const f = sums.first[k]!;
		slope[k] = sums.trace[k]! - f[c * c - 1]!;
		if (reml) for (let i = 0; i < p; i++) slope[k]! -= f[i * c + i]!;
		for (let l = 0; l < count; l++) {
			const g = sums.first[l]!;
			const at = k * count + l;
			let mean = 0;
			let mixed = 0;
			for (let i = 0; i < p; i++) {
				for (let j = 0; j < p; j++) mean += f[i * c + j]! * g[i * c + j]!;
				mixed += f[i * c + p]! * g[i * c + p]!;
			}
			expected[at] = sums.traces[at]! - 2 * sums.meanTraces[at]! + mean;
			observed[at] = 2 * (sums.squares[at]! - mixed) - sums.bendSquares[at]! + sums.bendTraces[at]!;
			observed[at]! -= reml ? expected[at]! + sums.bendMeanTraces[at]! : sums.traces[at]!;
		}
	}
	const order = [...natural.blocks, ...(count > natural.blocks.length ? [natural.visit] : [])];
	return {
		sums,
		turn,
		names: order.map((k) => natural.parameters[k]!.name),
		slope,
		observed,
		expected
	};
}

function refuseSingular(): never {
	throw new StatsError(
		'singular-information',
		'The data hold no separate information on each variance, so degrees of freedom cannot be computed.'
	);
}

/** Twice the inverse of a matrix of second derivatives of −2 log-likelihood: a covariance. Errors: `singular-information`. */
export function covarianceFrom(information: Float64Array, count: number): Float64Array {
	const found = invertPositive(information, count);
	if (!found) return refuseSingular();
	return found.inverse.map((v) => 2 * v);
}

/** A joint test that every row of weights times the coefficients is zero. */
export interface JointTest {
	numeratorDf: number;
	denominatorDf: number;
	/** By which the Wald statistic is multiplied; 1 except for Kenward–Roger. */
	scaling: number;
	f: number;
	p: number;
}

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

/** P(F > f) for Fisher's F with `a` and `b` degrees of freedom. */
function fisherTail(f: number, a: number, b: number): number {
	if (!(f > 0)) return 1;
	const share = b / (b + a * f);
	return incompleteBeta(share, (a * f) / (b + a * f), b / 2, a / 2);
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

function dependentRows(): never {
	throw new StatsError(
		'bad-option',
		'The rows of the joint test determine one another; leave out those that follow from the others.'
	);
}

/** e'V⁻¹e. */
function waldOf(e: readonly number[], v: Float64Array): number {
	const q = e.length;
	const found = invertPositive(v, q);
	if (!found) return dependentRows();
	let sum = 0;
	for (let i = 0; i < q; i++)
		for (let j = 0; j < q; j++) sum += e[i]! * found.inverse[i * q + j]! * e[j]!;
	return sum;
}

/** Independent single rows by the eigenvectors of the covariance, their degrees of freedom put together. */
function jointSatterthwaite(
	estimate: readonly number[],
	w: readonly Float64Array[],
	v: Float64Array,
	singleDf: (w: Float64Array) => number
): JointTest {
	const q = estimate.length;
	const wald = waldOf(estimate, v);
	const m = new Matrix(q, q);
	for (let i = 0; i < q; i++) for (let j = 0; j < q; j++) m.set(i, j, v[i * q + j]!);
	const { eigenvectorMatrix: vectors } = new EigenvalueDecomposition(m, { assumeSymmetric: true });
	const dfs = Array.from({ length: q }, (_, k) => {
		const row = new Float64Array(w[0]!.length);
		for (let i = 0; i < q; i++)
			for (let j = 0; j < row.length; j++) row[j]! += vectors.get(i, k) * w[i]![j]!;
		return singleDf(row);
	});
	const f = wald / q;
	const low = Math.min(...dfs);
	const high = Math.max(...dfs);
	let df: number;
	if (high - low < 1e-8 * high) df = high;
	else if (low <= 2) df = 2;
	else {
		const e = dfs.reduce((sum, d) => sum + d / (d - 2), 0);
		df = (2 * e) / (e - q);
	}
	return { numeratorDf: q, denominatorDf: df, scaling: 1, f, p: fisherTail(f, q, df) };
}

/** Source: Kenward & Roger (1997), section 3, in the form of their equations for λ and m. */
function jointKenwardRoger(
	estimate: readonly number[],
	w: readonly Float64Array[],
	adjusted: Float64Array,
	sums: CurvatureSums,
	spread: Float64Array
): JointTest {
	const q = estimate.length;
	const { p, count } = sums;
	const c = p + 1;
	const gram = new Float64Array(q * q);
	w.forEach((a, i) => w.forEach((b, j) => (gram[i * q + j] = dot(a, b))));
	const found = invertPositive(gram, q);
	if (!found) return dependentRows();
	// G⁻¹ W F_k W' for each parameter: q × q.
	const m = Array.from({ length: count }, (_, k) => {
		const inside = new Float64Array(q * q);
		w.forEach((a, i) =>
			w.forEach((b, j) => {
				for (let h = 0; h < p; h++)
					for (let g = 0; g < p; g++)
						inside[i * q + j]! += a[h]! * sums.first[k]![h * c + g]! * b[g]!;
			})
		);
		const out = new Float64Array(q * q);
		for (let i = 0; i < q; i++)
			for (let j = 0; j < q; j++)
				for (let h = 0; h < q; h++)
					out[i * q + j]! += found.inverse[i * q + h]! * inside[h * q + j]!;
		return out;
	});
	const trace = (a: Float64Array) => {
		let sum = 0;
		for (let i = 0; i < q; i++) sum += a[i * q + i]!;
		return sum;
	};
	const transpose = (a: Float64Array) => {
		const t = new Float64Array(q * q);
		for (let i = 0; i < q; i++) for (let j = 0; j < q; j++) t[j * q + i] = a[i * q + j]!;
		return t;
	};
	let a1 = 0;
	let a2 = 0;
	for (let k = 0; k < count; k++)
		for (let l = 0; l < count; l++) {
			a1 += spread[k * count + l]! * trace(m[k]!) * trace(m[l]!);
			a2 += spread[k * count + l]! * inner(m[k]!, transpose(m[l]!));
		}
	const b = (a1 + 6 * a2) / (2 * q);
	const g = ((q + 1) * a1 - (q + 4) * a2) / ((q + 2) * a2);
	const d = 3 * q + 2 * (1 - g);
	const e = 1 / (1 - a2 / q);
	const v =
		((2 / q) * (1 + (g / d) * b)) / ((1 - ((q - g) / d) * b) ** 2 * (1 - ((q + 2 - g) / d) * b));
	const rho = v / (2 * e * e);
	const df = 4 + (q + 2) / (q * rho - 1);
	const scaling = df / (e * (df - 2));
	if (!Number.isFinite(scaling) || !(df > 0) || !(scaling > 0)) {
		throw new StatsError(
			'singular-information',
			'The data are too few for the Kenward–Roger degrees of freedom of this joint test.'
		);
	}
	const f = (scaling / q) * waldOf(estimate, adjusted);
	return { numeratorDf: q, denominatorDf: df, scaling, f, p: fisherTail(f, q, df) };
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
