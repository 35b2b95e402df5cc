import { addSubjectSlope, subjectCovariance, type Layout } from '../dependence/layout.js';
import type { Kernel } from './kernel.js';
import type { Rows } from './rows.js';
import { addEffectSlope, effectOf, emptyEffect } from './woodbury.js';

/** A'A for A = [Q r U], as wide as the moments; one pass over the rows. */
function totals(rows: Rows): Float64Array {
	const { n, c, a, visits, visit, width } = rows;
	const m = new Float64Array(width * width);
	const lower = new Float64Array(c * c);
	for (let i = 0; i < n; i++) {
		const at = i * c;
		for (let j = 0; j < c; j++) {
			const v = a[at + j]!;
			const to = j * c;
			for (let k = 0; k <= j; k++) lower[to + k]! += v * a[at + k]!;
		}
		if (visits > 0) {
			const u = c + visit[i]!;
			for (let j = 0; j < c; j++) m[u * width + j]! += a[at + j]!;
			m[u * width + u]! += 1;
		}
	}
	for (let j = 0; j < c; j++)
		for (let k = 0; k <= j; k++) m[j * width + k] = m[k * width + j] = lower[j * c + k]!;
	for (let u = c; u < width; u++) for (let j = 0; j < c; j++) m[j * width + u] = m[u * width + j]!;
	return m;
}

/** Subjects whose Z'Z is the same count as one: Σ B ⊗ B, (q·width)² each, or B itself when few are alike. */
interface Classes {
	count: Float64Array;
	/** q × q each. */
	zz: Float64Array;
	/** Σ over its subjects of B B' laid out as (q·width) × (q·width); null when each subject is a class. */
	moments: Float64Array | null;
	/** q × width each, when each subject is a class. */
	b: Float64Array;
	classes: number;
}

function classesOf(rows: Rows): Classes {
	const { c, a, visits, visit, q, z, subjectStart, width } = rows;
	const subjects = subjectStart.length - 1;
	const zz = new Float64Array(subjects * q * q);
	const b = new Float64Array(subjects * q * width);
	for (let s = 0; s < subjects; s++) {
		const zAt = s * q * q;
		const bAt = s * q * width;
		for (let i = subjectStart[s]!; i < subjectStart[s + 1]!; i++)
			for (let e = 0; e < q; e++) {
				const f = z[i * q + e]!;
				for (let d = 0; d < q; d++) zz[zAt + e * q + d]! += f * z[i * q + d]!;
				const to = bAt + e * width;
				for (let j = 0; j < c; j++) b[to + j]! += f * a[i * c + j]!;
				if (visits > 0) b[to + c + visit[i]!]! += f;
			}
	}
	const known = new Map<string | number, number>();
	const classOf = new Int32Array(subjects);
	const first: number[] = [];
	for (let s = 0; s < subjects; s++) {
		const at = s * q * q;
		const key = q === 1 ? zz[at]! : `${zz[at]}|${zz[at + 1]}|${zz[at + 3]}`;
		let found = known.get(key);
		if (found === undefined) {
			found = first.length;
			// Once most subjects are seen to differ there is nothing to gather.
			if (found > 2000 && found > subjects / 8) break;
			known.set(key, found);
			first.push(s);
		}
		classOf[s] = found;
	}
	const side = q * width;
	const gather = first.length * side <= (subjects / 2) * q || first.length === 1;
	if (!gather || first.length > Math.max(1, subjects / 8))
		return { count: new Float64Array(subjects).fill(1), zz, moments: null, b, classes: subjects };
	const classes = first.length;
	const moments = new Float64Array(classes * side * side);
	const count = new Float64Array(classes);
	const classZz = new Float64Array(classes * q * q);
	for (let s = 0; s < subjects; s++) {
		const k = classOf[s]!;
		count[k]!++;
		const from = s * side;
		const to = k * side * side;
		for (let i = 0; i < side; i++) {
			const v = b[from + i]!;
			if (v !== 0) for (let j = 0; j < side; j++) moments[to + i * side + j]! += v * b[from + j]!;
		}
	}
	first.forEach((s, k) => classZz.set(zz.subarray(s * q * q, (s + 1) * q * q), k * q * q));
	return { count, zz: classZz, moments, b: new Float64Array(0), classes };
}

/**
 * Independent errors of one variance, with any subject effects: after one pass the cost depends on the number of
 * subjects, or of different schedules, and on nothing else.
 * Source: Lindstrom & Bates (1988), JASA 83:1014-1022, for the reduction to Z'Z and Z'[X y].
 */
export function offsetKernel(rows: Rows, layout: Layout): Kernel {
	const { q, width } = rows;
	const whole = totals(rows);
	if (q === 0) {
		return { forward: () => ({ m: whole, logDeterminant: 0 }), backward: () => undefined };
	}
	const { count, zz, moments, b, classes } = classesOf(rows);
	const side = q * width;
	const effect = emptyEffect(q);
	const cc = new Float64Array(q * q);
	const load = (g: Float64Array, k: number) => {
		for (let e = 0; e < q * q; e++) cc[e] = zz[k * q * q + e]!;
		return effectOf(g, cc, q, effect);
	};
	return {
		forward(x) {
			const g = subjectCovariance(layout, x);
			const m = whole.slice();
			let log = 0;
			for (let s = 0; s < classes; s++) {
				const { k, logDeterminant } = load(g, s);
				log += count[s]! * logDeterminant;
				if (moments) {
					const from = s * side * side;
					for (let e = 0; e < q; e++)
						for (let f = 0; f < q; f++) {
							const w = k[e * q + f]!;
							if (w === 0) continue;
							for (let i = 0; i < width; i++) {
								const row = from + (e * width + i) * side + f * width;
								const to = i * width;
								for (let j = 0; j <= i; j++) m[to + j]! -= w * moments[row + j]!;
							}
						}
				} else {
					const at = s * side;
					for (let i = 0; i < width; i++) {
						const to = i * width;
						if (q === 1) {
							const v = k[0]! * b[at + i]!;
							if (v !== 0) for (let j = 0; j <= i; j++) m[to + j]! -= v * b[at + j]!;
						} else {
							const v0 = k[0]! * b[at + i]! + k[1]! * b[at + width + i]!;
							const v1 = k[1]! * b[at + i]! + k[3]! * b[at + width + i]!;
							for (let j = 0; j <= i; j++) m[to + j]! -= v0 * b[at + j]! + v1 * b[at + width + j]!;
						}
					}
				}
			}
			for (let i = 0; i < width; i++)
				for (let j = 0; j < i; j++) m[j * width + i] = m[i * width + j]!;
			return { m, logDeterminant: log };
		},
		backward(x, h, slope) {
			const g = subjectCovariance(layout, x);
			const total = new Float64Array(q * q);
			const bhb = new Float64Array(q * q);
			const hb = new Float64Array(side);
			for (let s = 0; s < classes; s++) {
				load(g, s);
				if (moments) {
					for (let e = 0; e < q; e++)
						for (let f = 0; f < q; f++) {
							let sum = 0;
							for (let i = 0; i < width; i++) {
								const row = s * side * side + (e * width + i) * side + f * width;
								for (let j = 0; j < width; j++) sum += h[i * width + j]! * moments[row + j]!;
							}
							bhb[e * q + f] = sum;
						}
				} else {
					const at = s * side;
					for (let e = 0; e < q; e++)
						for (let i = 0; i < width; i++) {
							let sum = 0;
							const row = i * width;
							const from = at + e * width;
							for (let j = 0; j < width; j++) sum += h[row + j]! * b[from + j]!;
							hb[e * width + i] = sum;
						}
					for (let e = 0; e < q; e++)
						for (let f = 0; f < q; f++) {
							let sum = 0;
							for (let i = 0; i < width; i++) sum += b[at + e * width + i]! * hb[f * width + i]!;
							bhb[e * q + f] = sum;
						}
				}
				addEffectSlope(total, q, count[s]!, cc, bhb, effect);
			}
			addSubjectSlope(layout, x, total, slope);
		}
	};
}
