import { StatsError } from '../errors.js';
import type { RandomStream } from './random.js';

/**
 * The lower triangle L of LL' = covariance (p × p), row by row (p × p, row-major), zeros above.
 *
 * A covariance may be singular (a variance of zero): the column of a vanishing pivot is then zero. One with a
 * negative direction is refused by the row at which it shows.
 */
export function covarianceFactor(covariance: readonly (readonly number[])[]): Float64Array {
	const p = covariance.length;
	const factor = new Float64Array(p * p);
	for (const [i, row] of covariance.entries())
		for (const [j, value] of row.entries()) {
			const other = covariance[j]?.[i];
			if (row.length !== p || other === undefined)
				throw new StatsError('shape-mismatch', 'A covariance must have as many columns as rows.');
			if (!Number.isFinite(value) || Math.abs(value - other) > 1e-9 * Math.abs(value))
				throw new StatsError(
					'bad-option',
					`A covariance must be finite and symmetric; the entry in row ${i + 1}, column ${j + 1} is ${value} and its mirror ${other}.`
				);
		}
	for (let j = 0; j < p; j++) {
		let pivot = covariance[j]![j]!;
		for (let k = 0; k < j; k++) pivot -= factor[j * p + k]! ** 2;
		const zero = 1e-12 * Math.abs(covariance[j]![j]!);
		const root = pivot > zero ? Math.sqrt(pivot) : 0;
		factor[j * p + j] = root;
		for (let i = j + 1; i < p; i++) {
			let sum = covariance[i]![j]!;
			for (let k = 0; k < j; k++) sum -= factor[i * p + k]! * factor[j * p + k]!;
			const negligible = 1e-6 * Math.sqrt(Math.abs(covariance[i]![i]! * covariance[j]![j]!));
			if (pivot < -zero || (root === 0 && Math.abs(sum) > negligible)) notACovariance(j);
			factor[i * p + j] = root === 0 ? 0 : sum / root;
		}
		if (pivot < -zero) notACovariance(j);
	}
	return factor;
}

function notACovariance(row: number): never {
	throw new StatsError(
		'bad-option',
		`This is not a covariance: given the variables before it, number ${row + 1} would have a negative variance.`,
		{ row: row + 1 }
	);
}

/** A draw from the normal distribution with `mean` (length p) and the covariance LL', L from `covarianceFactor`. */
export function multivariateNormal(
	random: RandomStream,
	mean: ArrayLike<number>,
	factor: Float64Array
): Float64Array {
	const p = mean.length;
	if (factor.length !== p * p)
		throw new StatsError('shape-mismatch', 'The mean and the covariance differ in length.');
	const draw = new Float64Array(p);
	for (let i = 0; i < p; i++) draw[i] = random.normal();
	for (let i = p - 1; i >= 0; i--) {
		let sum = mean[i]!;
		for (let k = 0; k <= i; k++) sum += factor[i * p + k]! * draw[k]!;
		draw[i] = sum;
	}
	return draw;
}
