import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { outcomeDrawer } from '../fit/subject-view.js';
import { normalUpperQuantile } from '../numeric/distribution.js';
import { randomStream } from '../numeric/random.js';
import { inverseCovariance } from '../prediction/inverse-covariance.js';
import type { Supervision } from '../types.js';
import { normaliser } from './normalised.js';

/** A point of a Q–Q plot; all unitless. */
export interface QuantilePoint {
	/** Normal quantile of (rank − ½) / n. */
	expected: number;
	/** Normalised residual of that rank. */
	observed: number;
	/** Between which the residual of that rank lay in `confidence` of the data sets drawn from the fit. */
	lower: number;
	upper: number;
	/** Row of the design it belongs to. */
	row: number;
}

export interface QuantilePlot {
	points: QuantilePoint[];
	/** Share of the points outside their limits; about 1 − confidence when the model is right. */
	outside: number;
	simulations: number;
}

export interface QuantilePlotOptions extends Supervision {
	seed: number;
	/** Data sets drawn; 199 unless said otherwise. */
	simulations?: number;
	/** Of each point's limits; 0.95 unless said otherwise. */
	confidence?: number;
}

/**
 * Normalised residuals against normal quantiles, with limits by simulation from the fitted model.
 *
 * Each drawn data set has its mean estimated anew with the covariance held, so that limits know what that takes from
 * residuals, not what estimating the covariance does. Limits are pointwise. Data set k draws from stream k of the seed.
 * Errors: `bad-option`, `stopped`, `singular-information`.
 * Source: Atkinson (1985), Plots, Transformations and Regression, chapter 4.
 */
export function quantilePlot(fit: ModelFit, options: QuantilePlotOptions): QuantilePlot {
	const { seed, simulations = 199, confidence = 0.95, shouldStop, onProgress } = options;
	if (!Number.isInteger(simulations) || simulations < 19)
		throw new StatsError(
			'bad-option',
			`An envelope of ${simulations} simulations says nothing; at least 19 are needed.`
		);
	if (!(confidence > 0 && confidence < 1))
		throw new StatsError(
			'bad-option',
			`The confidence is ${confidence}; it must lie between 0 and 1.`
		);
	const { design, rows, y } = fit.prepared;
	const { n, p } = design;
	const inverse = inverseCovariance(fit);
	const normalise = normaliser(fit);
	const draw = outcomeDrawer(fit);
	const drawn = Array.from({ length: n }, () => new Float64Array(simulations));
	for (let k = 0; k < simulations; k++) {
		if (shouldStop?.()) throw new StatsError('stopped', 'The simulation was stopped.');
		const sample = draw(randomStream(seed, k).normal);
		// Against the fitted mean; then less QΦQ'V⁻¹ of it: generalised least squares with V held.
		const residual = sample.map((v, i) => v - (y[i]! - inverse.residual[i]!));
		const score = new Float64Array(p);
		for (let i = 0; i < n; i++)
			for (let j = 0; j < p; j++) score[j]! += inverse.weightedBasis[i * p + j]! * residual[i]!;
		const shift = new Float64Array(p);
		for (let j = 0; j < p; j++)
			for (let l = 0; l < p; l++) shift[j]! += fit.coordinateCovariance[j * p + l]! * score[l]!;
		for (let i = 0; i < n; i++)
			for (let j = 0; j < p; j++) residual[i]! -= rows.a[i * rows.c + j]! * shift[j]!;
		normalise(residual)
			.sort()
			.forEach((value, i) => (drawn[i]![k] = value));
		onProgress?.((k + 1) / simulations);
	}
	const observed = normalise(inverse.residual);
	const order = Array.from({ length: n }, (_, i) => i).sort((a, b) => observed[a]! - observed[b]!);
	const tail = (1 - confidence) / 2;
	let outside = 0;
	const points = order.map((row, i): QuantilePoint => {
		const values = drawn[i]!.sort();
		const lower = quantileOf(values, tail);
		const upper = quantileOf(values, 1 - tail);
		const value = observed[row]!;
		if (value < lower || value > upper) outside++;
		return {
			expected: normalUpperQuantile(1 - (i + 0.5) / n),
			observed: value,
			lower,
			upper,
			row
		};
	});
	return { points, outside: outside / n, simulations };
}

/** The quantile at p of sorted values, linear between them: value at p(m + 1), within the first and the last. */
function quantileOf(sorted: Float64Array, p: number): number {
	const at = Math.min(sorted.length, Math.max(1, p * (sorted.length + 1)));
	const below = Math.floor(at);
	const low = sorted[below - 1]!;
	return low + (at - below) * ((sorted[below] ?? low) - low);
}
