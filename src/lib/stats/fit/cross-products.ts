import { Matrix } from 'ml-matrix';
import type { Design } from '../design/design.js';
import { StatsError } from '../errors.js';
import { orthonormalise, project, type OrthonormalBasis } from '../numeric/orthonormal.js';

/** The subjects who were seen `size` times. */
export interface SizeClass {
	size: number;
	subjects: number;
	/** (p + 1) × (p + 1): the sum over these subjects of size · m m', m the subject's mean of [Q r]. */
	between: Matrix;
}

/**
 * All the likelihood of a lasting-offset model needs of the data, after one pass over the rows.
 *
 * [Q r] is the orthonormal basis of X beside the least-squares residual r of the outcome; a row of the
 * (p + 1) × (p + 1) matrices is a column of it. Q unitless, r in outcome units.
 */
export interface CrossProducts {
	n: number;
	p: number;
	subjects: number;
	basis: OrthonormalBasis;
	/** log|X'X| = 2 log|R|; depends on the units of the columns of X. */
	logDeterminantOfX: number;
	/** Q'y. */
	leastSquares: number[];
	/** y − QQ'y, n long. */
	residual: Float64Array;
	/** Sum over rows of d d', d the deviation of a row of [Q r] from its subject's mean. */
	within: Matrix;
	/** By size, ascending. */
	classes: SizeClass[];
}

/** Errors: `rank-deficient`, naming the column and those that determine it. */
function basisOf(design: Design): OrthonormalBasis {
	const found = orthonormalise(design.x, design.n, design.p);
	if ('basis' in found) return found.basis;
	const column = design.names[found.alias.column]!;
	const others = found.alias.of.map((k) => design.names[k]!);
	throw new StatsError(
		'rank-deficient',
		others.length === 0
			? `The column “${column}” is zero in every usable row, so its coefficient cannot be estimated.`
			: `The column “${column}” is determined by ${others.map((o) => `“${o}”`).join(', ')} in the usable rows, so its coefficient cannot be estimated. Leave one of them out.`,
		{ column, determinedBy: others }
	);
}

/** Positions of rows subject by subject, and where each subject's begin. */
function bySubject(design: Design): { order: Int32Array; starts: Int32Array } {
	const starts = new Int32Array(design.subjects.length + 1);
	for (const s of design.subject) starts[s + 1]!++;
	for (let s = 0; s < design.subjects.length; s++) starts[s + 1]! += starts[s]!;
	const next = starts.slice();
	const order = new Int32Array(design.n);
	design.subject.forEach((s, i) => (order[next[s]!++] = i));
	return { order, starts };
}

function addOuter(target: Float64Array, v: Float64Array, weight: number): void {
	const k = v.length;
	for (let a = 0; a < k; a++) {
		const wa = weight * v[a]!;
		for (let b = 0; b <= a; b++) target[a * k + b]! += wa * v[b]!;
	}
}

function fromLowerHalf(half: Float64Array, k: number): Matrix {
	const m = new Matrix(k, k);
	for (let a = 0; a < k; a++)
		for (let b = 0; b <= a; b++) {
			m.set(a, b, half[a * k + b]!);
			m.set(b, a, half[a * k + b]!);
		}
	return m;
}

/**
 * The one pass over the rows: O(n p²) here, nothing of size n afterwards.
 *
 * With V = σ²(I + λ J) on a subject seen m times, V⁻¹ = [(I − J/m) + J/m / (1 + mλ)] / σ², so that
 * σ² [Q r]'V⁻¹[Q r] = within + Σ between / (1 + size λ). Errors: `rank-deficient`.
 * Source: the spectral form of compound symmetry, Searle, Casella & McCulloch (1992), Variance Components, 3.6.
 */
export function crossProducts(design: Design): CrossProducts {
	const { n, p } = design;
	const basis = basisOf(design);
	const { coordinates, residual } = project(basis, design.y);
	const k = p + 1;
	const { order, starts } = bySubject(design);
	const within = new Float64Array(k * k);
	const classes = new Map<number, { subjects: number; between: Float64Array }>();
	const mean = new Float64Array(k);
	const deviation = new Float64Array(k);
	const value = (row: number, j: number) => (j < p ? basis.q[j * n + row]! : residual[row]!);
	for (let s = 0; s < design.subjects.length; s++) {
		const from = starts[s]!;
		const to = starts[s + 1]!;
		const size = to - from;
		for (let j = 0; j < k; j++) {
			let sum = 0;
			for (let at = from; at < to; at++) sum += value(order[at]!, j);
			mean[j] = sum / size;
		}
		for (let at = from; at < to; at++) {
			for (let j = 0; j < k; j++) deviation[j] = value(order[at]!, j) - mean[j]!;
			addOuter(within, deviation, 1);
		}
		const known = classes.get(size) ?? { subjects: 0, between: new Float64Array(k * k) };
		known.subjects++;
		addOuter(known.between, mean, size);
		classes.set(size, known);
	}
	let logDeterminantOfX = 0;
	for (let j = 0; j < p; j++) logDeterminantOfX += 2 * Math.log(basis.r.get(j, j));
	return {
		n,
		p,
		subjects: design.subjects.length,
		basis,
		logDeterminantOfX,
		leastSquares: coordinates,
		residual,
		within: fromLowerHalf(within, k),
		classes: [...classes]
			.sort(([a], [b]) => a - b)
			.map(([size, c]) => ({
				size,
				subjects: c.subjects,
				between: fromLowerHalf(c.between, k)
			}))
	};
}
