import type { ModelDesign } from '../design/model-design.js';
import { isSerial, type Layout } from '../dependence/layout.js';

/** The columns of the likelihood, a row after the other: [Q r | visit indicators | Z]. */
export interface Rows {
	n: number;
	/** p + 1: columns of [Q r]. */
	c: number;
	/** n × c: orthonormal basis of X beside the least-squares residual. */
	a: Float64Array;
	/** Shared visit effects; 0 without them. */
	visits: number;
	visit: Int32Array;
	q: number;
	/** n × q; level 1, slope (time − origin) / unit. */
	z: Float64Array;
	subjectStart: Int32Array;
	/** Row at each place when serial errors go by visit and somebody's visits are not in the order of time; else null. */
	order: Int32Array | null;
	/** c + visits: width of the moments. */
	width: number;
}

/** Rows of each subject in the order of visits, or null when they already are or it does not matter. */
export function visitOrder(design: ModelDesign, layout: Layout): Int32Array | null {
	const { dependence } = layout;
	if (!isSerial(dependence) || dependence.errors.along !== 'visit') return null;
	const { subjectStart: start, visit } = design;
	const order = Int32Array.from({ length: design.n }, (_, i) => i);
	let disturbed = false;
	for (let s = 0; s + 1 < start.length; s++) {
		const own = order.subarray(start[s]!, start[s + 1]!);
		if (!own.some((i, at) => at > 0 && visit[i]! < visit[i - 1]!)) continue;
		disturbed = true;
		own.sort((a, b) => visit[a]! - visit[b]!);
	}
	return disturbed ? order : null;
}

export function rowsOf(
	design: ModelDesign,
	layout: Layout,
	basis: Float64Array,
	residual: Float64Array
): Rows {
	const { n, p } = design;
	const c = p + 1;
	const a = new Float64Array(n * c);
	for (let j = 0; j < p; j++) for (let i = 0; i < n; i++) a[i * c + j] = basis[j * n + i]!;
	for (let i = 0; i < n; i++) a[i * c + p] = residual[i]!;
	const { q } = layout;
	const z = new Float64Array(n * q);
	const effects = layout.dependence.subjectEffects;
	if (q > 0)
		for (let i = 0; i < n; i++) {
			const t = (design.time[i]! - layout.timeOrigin) / layout.timeUnit;
			if (effects === 'slope') z[i] = t;
			else {
				z[i * q] = 1;
				if (q === 2) z[i * q + 1] = t;
			}
		}
	const visits = layout.dependence.visitEffects ? design.visits.length : 0;
	return {
		n,
		c,
		a,
		visits,
		visit: design.visit,
		q,
		z,
		subjectStart: design.subjectStart,
		order: visitOrder(design, layout),
		width: c + visits
	};
}
