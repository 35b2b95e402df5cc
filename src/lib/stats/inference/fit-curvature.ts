import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { choleskyInPlace, invertPositive } from '../numeric/dense.js';
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
