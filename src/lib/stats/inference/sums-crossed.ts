import type { NaturalModel } from '../dependence/natural.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import {
	block,
	crossProduct,
	inner,
	invertPositive,
	product,
	solveLower
} from '../numeric/dense.js';
import { patternsOf, whitenPattern } from './whitened-pattern.js';
import type { CurvatureSums } from './curvature-sums.js';
import { whitenedMean } from './sums-within.js';

const transposed = (m: Float64Array, rows: number, columns: number) => {
	const out = new Float64Array(m.length);
	for (let i = 0; i < rows; i++)
		for (let j = 0; j < columns; j++) out[j * rows + i] = m[i * columns + j]!;
	return out;
};

/**
 * The sums when all subjects share visit effects: V = V₀ + uUU', by Woodbury on the visits.
 *
 * With A = [X̂ r U] and S = (I/u + U'V₀⁻¹U)⁻¹: V⁻¹[X̂ r] = V₀⁻¹A a, V⁻¹U = V₀⁻¹A b, so that all that is asked are
 * combinations of A'V₀⁻¹V_kV₀⁻¹A and A'V₀⁻¹V_kV₀⁻¹V_lV₀⁻¹A, sums over subjects.
 */
export function sumsCrossed(
	prepared: PreparedModel,
	natural: NaturalModel,
	turn: Float64Array,
	residual: Float64Array
): CurvatureSums {
	const blocks = natural.blocks.length;
	const withVisit = natural.visit >= 0;
	const count = blocks + (withVisit ? 1 : 0);
	const { c, visits: K, visit, subjectStart } = prepared.rows;
	const p = c - 1;
	const width = c + K;
	const pairs = (blocks * (blocks + 1)) / 2;
	const pairAt = (k: number, l: number) => (k * (k + 1)) / 2 + l;
	const make = () => new Float64Array(width * width);
	const whole = make();
	const single = Array.from({ length: blocks }, make);
	const double = Array.from({ length: pairs }, make);
	const bends = new Map<number, Float64Array>();
	const trace0 = new Float64Array(blocks);
	const traces0 = new Float64Array(pairs);
	const bendTraces0 = new Float64Array(pairs);
	const add = (to: Float64Array, left: Float64Array, right: Float64Array, n: number) => {
		for (let i = 0; i < n; i++)
			for (let g = 0; g < width; g++) {
				const f = left[i * width + g]!;
				if (f === 0) continue;
				for (let h = 0; h < width; h++) to[g * width + h]! += f * right[i * width + h]!;
			}
	};
	for (const found of patternsOf(prepared)) {
		const pattern = whitenPattern(natural, found);
		const { n, first, second, subjects } = pattern;
		first.forEach((d, k) => {
			if (d.length === 0) return;
			for (let i = 0; i < n; i++) trace0[k]! += subjects.length * d[i * n + i]!;
			for (let l = 0; l <= k; l++)
				if (first[l]!.length > 0) traces0[pairAt(k, l)]! += subjects.length * inner(d, first[l]!);
		});
		for (const { k, l, matrix } of second)
			for (let i = 0; i < n; i++)
				bendTraces0[pairAt(Math.max(k, l), Math.min(k, l))]! +=
					subjects.length * matrix[i * n + i]!;
		// The visit columns are the same for every subject of a pattern.
		const u = new Float64Array(n * K);
		const from = subjectStart[subjects[0]!]!;
		for (let i = 0; i < n; i++) u[i * K + visit[from + i]!] = 1;
		solveLower(pattern.factor, n, u, K);
		for (const s of subjects) {
			const mean = whitenedMean(prepared, pattern, s, turn, residual);
			const a = new Float64Array(n * width);
			for (let i = 0; i < n; i++) {
				a.set(mean.subarray(i * c, (i + 1) * c), i * width);
				a.set(u.subarray(i * K, (i + 1) * K), i * width + c);
			}
			add(whole, a, a, n);
			const da = first.map((d) => (d.length === 0 ? d : product(d, a, n, n, width)));
			da.forEach((d, k) => {
				if (d.length === 0) return;
				add(single[k]!, a, d, n);
				for (let l = 0; l <= k; l++)
					if (da[l]!.length > 0) add(double[pairAt(k, l)]!, d, da[l]!, n);
			});
			for (const { k, l, matrix } of second) {
				const at = pairAt(Math.max(k, l), Math.min(k, l));
				let to = bends.get(at);
				if (!to) bends.set(at, (to = make()));
				add(to, a, product(matrix, a, n, n, width), n);
			}
		}
	}

	const uu = block(whole, width, c, width, c, width);
	const inverse = uu.map((v) => v * natural.visitRatio);
	for (let i = 0; i < K; i++) inverse[i * K + i]! += 1;
	const s = invertPositive(inverse, K)!.inverse.map((v) => v * natural.visitRatio);
	const au = block(whole, width, 0, c, c, width);
	// a (width × c) and b (width × K).
	const a = new Float64Array(width * c);
	const sua = product(s, transposed(au, c, K), K, K, c);
	for (let j = 0; j < c; j++) {
		a[j * c + j] = 1;
		for (let k = 0; k < K; k++) a[(c + k) * c + j] = -sua[k * c + j]!;
	}
	const b = new Float64Array(width * K);
	const suu = product(s, uu, K, K, K);
	for (let k = 0; k < K; k++)
		for (let l = 0; l < K; l++) b[(c + k) * K + l] = (k === l ? 1 : 0) - suu[k * K + l]!;
	const around = (m: Float64Array) => crossProduct(a, product(m, a, width, width, c), width, c, c);
	const uRows = block(whole, width, c, width, 0, width);
	const h = product(uRows, a, K, width, c);
	const t = product(uRows, b, K, width, K);
	const ofU = (m: Float64Array) => block(m, width, c, width, c, width);

	const square = () => new Float64Array(count * count);
	const result = {
		count,
		p,
		trace: new Float64Array(count),
		first: [] as Float64Array[],
		traces: square(),
		meanTraces: square(),
		squares: square(),
		bendTraces: square(),
		bendMeanTraces: square(),
		bendSquares: square()
	};
	const second = new Map<number, Float64Array>();
	const bend = new Map<number, Float64Array>();
	const meanTrace = (m: Float64Array) => {
		let sum = 0;
		for (let i = 0; i < p; i++) sum += m[i * c + i]!;
		return sum;
	};
	const both = (m: Float64Array, k: number, l: number, v: number) => {
		m[k * count + l] = m[l * count + k] = v;
	};
	for (let k = 0; k < blocks; k++) {
		result.first.push(around(single[k]!));
		const su = product(s, ofU(single[k]!), K, K, K);
		let lost = 0;
		for (let i = 0; i < K; i++) lost += su[i * K + i]!;
		result.trace[k] = trace0[k]! - lost;
		for (let l = 0; l <= k; l++) {
			const at = pairAt(k, l);
			const sl = product(s, ofU(single[l]!), K, K, K);
			both(
				result.traces,
				k,
				l,
				traces0[at]! - 2 * inner(s, ofU(double[at]!)) + inner(su, transposed(sl, K, K))
			);
			const left = crossProduct(a, block(single[k]!, width, 0, width, c, width), width, c, K);
			const right = product(block(single[l]!, width, c, width, 0, width), a, K, width, c);
			const q = around(double[at]!);
			const correction = product(product(left, s, c, K, K), right, c, K, c);
			for (let i = 0; i < q.length; i++) q[i]! -= correction[i]!;
			second.set(k * count + l, q);
			both(result.meanTraces, k, l, meanTrace(q));
			both(result.squares, k, l, q[c * c - 1]!);
			const found = bends.get(at);
			if (found) {
				const m = around(found);
				bend.set(k * count + l, m);
				both(result.bendTraces, k, l, bendTraces0[at]! - inner(s, ofU(found)));
				both(result.bendMeanTraces, k, l, meanTrace(m));
				both(result.bendSquares, k, l, m[c * c - 1]!);
			}
		}
	}
	if (withVisit) {
		const v = blocks;
		result.first.push(crossProduct(h, h, K, c, c));
		for (let i = 0; i < K; i++) result.trace[v]! += t[i * K + i]!;
		for (let k = 0; k < blocks; k++) {
			const nb = product(single[k]!, b, width, width, K);
			const bnb = crossProduct(b, nb, width, K, K);
			let sum = 0;
			for (let i = 0; i < K; i++) sum += bnb[i * K + i]!;
			both(result.traces, v, k, sum);
			const q = product(crossProduct(a, nb, width, c, K), h, c, K, c);
			second.set(v * count + k, q);
			both(result.meanTraces, v, k, meanTrace(q));
			both(result.squares, v, k, q[c * c - 1]!);
		}
		both(result.traces, v, v, inner(t, t));
		const q = crossProduct(h, product(t, h, K, K, c), K, c, c);
		second.set(v * count + v, q);
		both(result.meanTraces, v, v, meanTrace(q));
		both(result.squares, v, v, q[c * c - 1]!);
	}
	return {
		...result,
		weighted(w, withBends = true) {
			const total = new Float64Array(p * p);
			for (let k = 0; k < count; k++)
				for (let l = 0; l <= k; l++) {
					const f = w[k * count + l]!;
					const q = second.get(k * count + l)!;
					const r = withBends ? bend.get(k * count + l) : undefined;
					for (let i = 0; i < p; i++)
						for (let j = 0; j < p; j++) {
							// w is symmetric, so Q_kl and Q_lk = Q_kl' come together.
							const own = k === l ? q[i * c + j]! : q[i * c + j]! + q[j * c + i]!;
							total[i * p + j]! += f * own;
							if (r) total[i * p + j]! -= (f * (k === l ? 1 : 2) * r[i * c + j]!) / 4;
						}
				}
			return total;
		}
	};
}
