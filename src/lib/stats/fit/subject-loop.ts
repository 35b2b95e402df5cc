import { addSubjectSlope, subjectCovariance, type Layout } from '../dependence/layout.js';
import type { Kernel } from './kernel.js';
import type { Rows } from './rows.js';
import { addEffectSlope, effectOf, emptyEffect } from './woodbury.js';

/**
 * One way to take the leftover covariance R of a subject out of its columns [A Z], `w` = width + q of them.
 *
 * `columns` holds the subject's rows, row-major. `whiten` adds A'R⁻¹A … to the lower half of `m` (w × w) and gives
 * log|R| back, or NaN where R is not positive definite. `pull` is asked with h = ∂/∂m (w × w, symmetric) for the
 * same subject and adds the slope in its own parameters.
 */
export interface Whitening {
	prepare(x: Float64Array): boolean;
	whiten(subject: number, columns: Float64Array, count: number, m: Float64Array): number;
	pull(subject: number, columns: Float64Array, count: number, h: Float64Array): void;
	/** Adds what `pull` gathered since `prepare` to the slope in working parameters. */
	finish(slope: Float64Array): void;
	/** Whether there is any parameter for `pull`. */
	moves: boolean;
}

/** Copies a subject's rows of [Q r U Z] into `columns`. */
export function loadColumns(rows: Rows, subject: number, columns: Float64Array): number {
	const { c, a, visits, visit, q, z, subjectStart, order, width } = rows;
	const w = width + q;
	const from = subjectStart[subject]!;
	const count = subjectStart[subject + 1]! - from;
	for (let i = 0; i < count; i++) {
		const to = i * w;
		const row = order ? order[from + i]! : from + i;
		const at = row * c;
		for (let j = 0; j < c; j++) columns[to + j] = a[at + j]!;
		if (visits > 0) {
			for (let k = c; k < width; k++) columns[to + k] = 0;
			columns[to + c + visit[row]!] = 1;
		}
		for (let e = 0; e < q; e++) columns[to + width + e] = z[row * q + e]!;
	}
	return count;
}

/** Moments subject by subject: the leftover covariance by `whitening`, subject effects by Woodbury. */
export function subjectLoop(rows: Rows, layout: Layout, whitening: Whitening): Kernel {
	const { q, width, subjectStart } = rows;
	const w = width + q;
	const subjects = subjectStart.length - 1;
	const columns = new Float64Array(layout.mostPerSubject * w);
	const mi = new Float64Array(w * w);
	const effect = emptyEffect(q);
	const cc = new Float64Array(q * q);
	/** Z'R⁻¹[A Z] of every subject at the last point: q × w each. */
	const kept = new Float64Array(subjects * q * w);
	return {
		forward(x) {
			if (!whitening.prepare(x)) return null;
			const g = subjectCovariance(layout, x);
			const m = new Float64Array(width * width);
			let log = 0;
			const target = q === 0 ? m : mi;
			for (let s = 0; s < subjects; s++) {
				const count = loadColumns(rows, s, columns);
				if (q > 0) mi.fill(0);
				const own = whitening.whiten(s, columns, count, target);
				if (!Number.isFinite(own)) return null;
				log += own;
				if (q === 0) continue;
				const at = s * q * w;
				for (let e = 0; e < q; e++)
					for (let j = 0; j < w; j++)
						kept[at + e * w + j] =
							j <= width + e ? mi[(width + e) * w + j]! : mi[j * w + width + e]!;
				for (let e = 0; e < q; e++)
					for (let f = 0; f < q; f++) cc[e * q + f] = kept[at + e * w + width + f]!;
				effectOf(g, cc, q, effect);
				log += effect.logDeterminant;
				const { k } = effect;
				for (let i = 0; i < width; i++) {
					const to = i * width;
					const from = i * w;
					if (q === 1) {
						const v = k[0]! * kept[at + i]!;
						for (let j = 0; j <= i; j++) m[to + j]! += mi[from + j]! - v * kept[at + j]!;
					} else {
						const v0 = k[0]! * kept[at + i]! + k[1]! * kept[at + w + i]!;
						const v1 = k[1]! * kept[at + i]! + k[3]! * kept[at + w + i]!;
						for (let j = 0; j <= i; j++)
							m[to + j]! += mi[from + j]! - v0 * kept[at + j]! - v1 * kept[at + w + j]!;
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
			const hi = new Float64Array(w * w);
			const hb = new Float64Array(q * width);
			const khb = new Float64Array(q * width);
			const bhb = new Float64Array(q * q);
			for (let i = 0; i < width; i++)
				for (let j = 0; j < width; j++) hi[i * w + j] = h[i * width + j]!;
			for (let s = 0; s < subjects; s++) {
				if (q > 0) {
					const at = s * q * w;
					for (let e = 0; e < q; e++) {
						for (let f = 0; f < q; f++) cc[e * q + f] = kept[at + e * w + width + f]!;
						for (let i = 0; i < width; i++) {
							let sum = 0;
							for (let j = 0; j < width; j++) sum += h[i * width + j]! * kept[at + e * w + j]!;
							hb[e * width + i] = sum;
						}
					}
					effectOf(g, cc, q, effect);
					for (let e = 0; e < q; e++)
						for (let f = 0; f < q; f++) {
							let sum = 0;
							for (let i = 0; i < width; i++) sum += kept[at + e * w + i]! * hb[f * width + i]!;
							bhb[e * q + f] = sum;
						}
					addEffectSlope(total, q, 1, cc, bhb, effect);
					if (!whitening.moves) continue;
					const { k } = effect;
					for (let e = 0; e < q; e++)
						for (let i = 0; i < width; i++) {
							let sum = 0;
							for (let f = 0; f < q; f++) sum += k[e * q + f]! * hb[f * width + i]!;
							khb[e * width + i] = sum;
							hi[(width + e) * w + i] = hi[i * w + width + e] = -sum;
						}
					for (let e = 0; e < q; e++)
						for (let f = 0; f < q; f++) {
							let sum = k[e * q + f]!;
							for (let d = 0; d < q; d++)
								for (let b = 0; b < q; b++) sum += k[e * q + d]! * bhb[d * q + b]! * k[b * q + f]!;
							hi[(width + e) * w + width + f] = sum;
						}
				}
				if (whitening.moves) {
					const count = loadColumns(rows, s, columns);
					whitening.pull(s, columns, count, hi);
				}
			}
			if (q > 0) addSubjectSlope(layout, x, total, slope);
			if (whitening.moves) whitening.finish(slope);
		}
	};
}
