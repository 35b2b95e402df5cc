import type { NaturalModel } from '../dependence/natural.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import { inner, product, solveLower } from '../numeric/dense.js';
import { patternsOf, whitenPattern, type WhitenedPattern } from './whitened-pattern.js';
import type { CurvatureSums } from './curvature-sums.js';

interface Kept {
	pattern: WhitenedPattern;
	means: Float64Array[];
}

/** L⁻¹[X̂ r̂/σ] of a subject, n × (p + 1); `turn` (p × p) takes the basis to X̂. */
export function whitenedMean(
	prepared: PreparedModel,
	pattern: WhitenedPattern,
	subject: number,
	turn: Float64Array,
	residual: Float64Array
): Float64Array {
	const { a, c, subjectStart } = prepared.rows;
	const p = c - 1;
	const from = subjectStart[subject]!;
	const out = new Float64Array(pattern.n * c);
	for (let i = 0; i < pattern.n; i++) {
		const row = (from + i) * c;
		for (let j = 0; j < p; j++) {
			let sum = 0;
			for (let h = j; h < p; h++) sum += a[row + h]! * turn[h * p + j]!;
			out[i * c + j] = sum;
		}
		out[i * c + p] = residual[from + i]!;
	}
	solveLower(pattern.factor, pattern.n, out, c);
	return out;
}

/**
 * The sums for subjects that are independent of each other: pairs of parameters meet once a pattern, in n × n, and
 * never once a subject.
 */
export function sumsWithin(
	prepared: PreparedModel,
	natural: NaturalModel,
	turn: Float64Array,
	residual: Float64Array
): CurvatureSums {
	const count = natural.blocks.length;
	const { c } = prepared.rows;
	const p = c - 1;
	const square = () => new Float64Array(count * count);
	const sums = {
		count,
		p,
		trace: new Float64Array(count),
		first: natural.blocks.map(() => new Float64Array(c * c)),
		traces: square(),
		meanTraces: square(),
		squares: square(),
		bendTraces: square(),
		bendMeanTraces: square(),
		bendSquares: square()
	};
	const patterns = patternsOf(prepared);
	// Kept for `weighted` when they are not too many numbers.
	const cells = patterns.reduce(
		(sum, { occasions, subjects }) =>
			sum + occasions.time.length * (count * occasions.time.length + c * subjects.length),
		0
	);
	const kept = cells < 4e6 ? new Map<(typeof patterns)[number], Kept>() : null;
	for (const found of patterns) {
		const pattern = whitenPattern(natural, found);
		const means: Float64Array[] = [];
		kept?.set(found, { pattern, means });
		const { n, subjects, first, second } = pattern;
		const ofMean = new Float64Array(n * n);
		const ofResidual = new Float64Array(n * n);
		for (const s of subjects) {
			const m = whitenedMean(prepared, pattern, s, turn, residual);
			if (kept) means.push(m);
			for (let i = 0; i < n; i++)
				for (let j = 0; j <= i; j++) {
					let sum = 0;
					for (let h = 0; h < p; h++) sum += m[i * c + h]! * m[j * c + h]!;
					ofMean[i * n + j]! += sum;
					ofResidual[i * n + j]! += m[i * c + p]! * m[j * c + p]!;
				}
			first.forEach((d, k) => {
				if (d.length === 0) return;
				const dm = product(d, m, n, n, c);
				const to = sums.first[k]!;
				for (let i = 0; i < n; i++)
					for (let g = 0; g < c; g++) {
						const f = m[i * c + g]!;
						for (let h = 0; h <= g; h++) to[g * c + h]! += f * dm[i * c + h]!;
					}
			});
		}
		for (let i = 0; i < n; i++)
			for (let j = 0; j < i; j++) {
				ofMean[j * n + i] = ofMean[i * n + j]!;
				ofResidual[j * n + i] = ofResidual[i * n + j]!;
			}
		const times = subjects.length;
		first.forEach((d, k) => {
			if (d.length === 0) return;
			for (let i = 0; i < n; i++) sums.trace[k]! += times * d[i * n + i]!;
			const dMean = product(d, ofMean, n, n, n);
			const dResidual = product(d, ofResidual, n, n, n);
			for (let l = 0; l <= k; l++) {
				const e = first[l]!;
				if (e.length === 0) continue;
				sums.traces[k * count + l]! += times * inner(d, e);
				sums.meanTraces[k * count + l]! += inner(dMean, e);
				sums.squares[k * count + l]! += inner(dResidual, e);
			}
		});
		for (const { k, l, matrix } of second) {
			const at = Math.max(k, l) * count + Math.min(k, l);
			for (let i = 0; i < n; i++) sums.bendTraces[at]! += times * matrix[i * n + i]!;
			sums.bendMeanTraces[at]! += inner(matrix, ofMean);
			sums.bendSquares[at]! += inner(matrix, ofResidual);
		}
	}
	for (const m of sums.first)
		for (let g = 0; g < c; g++) for (let h = 0; h < g; h++) m[h * c + g] = m[g * c + h]!;
	for (const m of [
		sums.traces,
		sums.meanTraces,
		sums.squares,
		sums.bendTraces,
		sums.bendMeanTraces,
		sums.bendSquares
	])
		for (let k = 0; k < count; k++)
			for (let l = 0; l < k; l++) m[l * count + k] = m[k * count + l]!;
	return {
		...sums,
		weighted(w, bends = true) {
			const total = new Float64Array(p * p);
			for (const found of patterns) {
				const known = kept?.get(found);
				const pattern = known?.pattern ?? whitenPattern(natural, found);
				const { n, subjects, first, second } = pattern;
				const g = new Float64Array(n * n);
				first.forEach((d, k) => {
					if (d.length === 0) return;
					const mixed = new Float64Array(n * n);
					first.forEach((e, l) => {
						const f = w[k * count + l]!;
						for (let i = 0; i < e.length; i++) mixed[i]! += f * e[i]!;
					});
					const part = product(d, mixed, n, n, n);
					for (let i = 0; i < g.length; i++) g[i]! += part[i]!;
				});
				if (bends)
					for (const { k, l, matrix } of second) {
						const f = (w[k * count + l]! * (k === l ? 1 : 2)) / 4;
						for (let i = 0; i < g.length; i++) g[i]! -= f * matrix[i]!;
					}
				for (let at = 0; at < subjects.length; at++) {
					const m =
						known?.means[at] ?? whitenedMean(prepared, pattern, subjects[at]!, turn, residual);
					const gm = product(g, m, n, n, c);
					for (let i = 0; i < n; i++)
						for (let a = 0; a < p; a++) {
							const f = m[i * c + a]!;
							for (let b = 0; b < p; b++) total[a * p + b]! += f * gm[i * c + b]!;
						}
				}
			}
			return total;
		}
	};
}
