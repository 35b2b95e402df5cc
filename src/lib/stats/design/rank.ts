/** A column that the others determine: it equals Σ weight × column over `of`. */
export interface AliasedColumn {
	column: number;
	of: { column: number; weight: number }[];
}

export interface Rank {
	/** Columns that stand on their own, in order. */
	kept: number[];
	aliased: AliasedColumn[];
}

/** How much of a column must be left after the earlier ones are taken out, relative to its spread. */
const RANK_TOLERANCE = 1e-9;
const SPREAD_TOLERANCE = 1e-13;
/** Squared: below this the cross-products have lost too many digits to judge by. */
const CLEARLY_LEFT = 1e-8;
/** A share of the combination below this is rounding. */
const NO_SHARE = 1e-8;

function norm(v: Float64Array): number {
	let sum = 0;
	for (let i = 0; i < v.length; i++) sum += v[i]! * v[i]!;
	return Math.sqrt(sum);
}

/** Covariances of the columns after the first, over rows; null when a column does not vary. */
function scaledCrossProducts(x: Float64Array, n: number, p: number): Float64Array | null {
	const k = p - 1;
	const mean = new Float64Array(k);
	for (let j = 0; j < k; j++) {
		let sum = 0;
		for (let i = (j + 1) * n; i < (j + 2) * n; i++) sum += x[i]!;
		mean[j] = sum / n;
	}
	const products = new Float64Array(k * k);
	for (let a = 0; a < k; a++) {
		for (let b = 0; b <= a; b++) {
			const [from, other] = [(a + 1) * n, (b + 1) * n];
			let sum = 0;
			for (let i = 0; i < n; i++) sum += (x[from + i]! - mean[a]!) * (x[other + i]! - mean[b]!);
			products[a * k + b] = sum;
		}
	}
	const scale = Float64Array.from(mean, (_, j) => Math.sqrt(products[j * k + j]!));
	for (let j = 0; j < k; j++) {
		if (!(scale[j]! > 1e-6 * Math.abs(mean[j]!) * Math.sqrt(n)) || !Number.isFinite(scale[j]!))
			return null;
	}
	for (let a = 0; a < k; a++)
		for (let b = 0; b <= a; b++) products[a * k + b]! /= scale[a]! * scale[b]!;
	return products;
}

/** Whether cross-products alone already show that no column comes near to a combination of the others. */
function clearlyFullRank(x: Float64Array, n: number, p: number): boolean {
	const k = p - 1;
	const l = scaledCrossProducts(x, n, p);
	if (!l) return false;
	for (let j = 0; j < k; j++) {
		for (let i = j; i < k; i++) {
			let sum = l[i * k + j]!;
			for (let m = 0; m < j; m++) sum -= l[i * k + m]! * l[j * k + m]!;
			if (i === j) {
				if (!(sum > CLEARLY_LEFT)) return false;
				l[j * k + j] = Math.sqrt(sum);
			} else l[i * k + j] = sum / l[j * k + j]!;
		}
	}
	return true;
}

/** Takes the share of a direction out of `v` and returns it. */
function takeOut(v: Float64Array, direction: Float64Array): number {
	let share = 0;
	for (let i = 0; i < v.length; i++) share += direction[i]! * v[i]!;
	for (let i = 0; i < v.length; i++) v[i]! -= share * direction[i]!;
	return share;
}

/** R w = share for upper triangular R given by columns: the combination of kept columns with these shares. */
function combination(r: readonly number[][], share: readonly number[]): number[] {
	const weights = [...share];
	for (let k = share.length - 1; k >= 0; k--) {
		weights[k]! /= r[k]![k]!;
		for (let m = 0; m < k; m++) weights[m]! -= r[k]![m]! * weights[k]!;
	}
	return weights;
}

/**
 * Which columns of X (n × p, column-major, the first all ones) stand on their own, and what determines each of the rest.
 *
 * A column is aliased when less than 1e-9 of its spread is left once the earlier ones are taken out. Well-separated columns
 * are recognised from their cross-products in one pass; only otherwise are they taken out one by one, twice over.
 * Source: Björck (1967), BIT 7:1-21; Giraud, Langou & Rozložník (2005), Computers & Mathematics with Applications
 * 50:1069-1075 (twice is enough).
 */
export function rankOf(x: Float64Array, n: number, p: number): Rank {
	if (n > p && clearlyFullRank(x, n, p))
		return { kept: Array.from({ length: p }, (_, j) => j), aliased: [] };
	const kept: number[] = [];
	const aliased: AliasedColumn[] = [];
	const directions: Float64Array[] = [];
	const r: number[][] = [];
	for (let j = 0; j < p; j++) {
		const v = x.slice(j * n, (j + 1) * n);
		const whole = norm(v);
		const share = directions.map(() => 0);
		let spread = whole;
		for (let pass = 0; pass < 2; pass++) {
			for (let k = 0; k < directions.length; k++) {
				share[k]! += takeOut(v, directions[k]!);
				if (k === 0 && pass === 0) spread = norm(v);
			}
		}
		const left = norm(v);
		if (left > RANK_TOLERANCE * spread && spread > SPREAD_TOLERANCE * whole) {
			for (let i = 0; i < n; i++) v[i]! /= left;
			kept.push(j);
			directions.push(v);
			r.push([...share, left]);
			continue;
		}
		const weights = combination(r, share);
		const size = weights.map((w, k) => Math.abs(w) * Math.hypot(...r[k]!));
		const largest = Math.max(0, ...size);
		aliased.push({
			column: j,
			of: weights.flatMap((weight, k) =>
				size[k]! > NO_SHARE * largest ? [{ column: kept[k]!, weight }] : []
			)
		});
	}
	return { kept, aliased };
}
