import type { ModelDesign } from '../design/model-design.js';
import { isSerial, type Layout } from './layout.js';

/** The rows of a subject as far as its covariance goes. */
export interface Occasions {
	time: Float64Array;
	/** Positions in the matrix over visits. */
	position: Int32Array;
	visit: Int32Array;
	group: number;
}

/** V* = V/σ² of a subject without shared visit effects, and its derivatives in the active parameters (÷ σ²). */
export interface Derivatives {
	v: Float64Array;
	first: Float64Array[];
	second: { k: number; l: number; matrix: Float64Array }[];
}

export function occasionsOf(design: ModelDesign, layout: Layout, subject: number): Occasions {
	const from = design.subjectStart[subject]!;
	const to = design.subjectStart[subject + 1]!;
	const visit = design.visit.slice(from, to);
	return {
		time: design.time.slice(from, to),
		position: layout.positionsAreVisits ? visit : Int32Array.from(visit, (_, i) => i),
		visit,
		group: design.subjectGroup[subject]!
	};
}

/** Two subjects with the same key have the same covariance. */
export function patternKey(layout: Layout, o: Occasions): string {
	const { dependence: d } = layout;
	const parts = [String(o.time.length)];
	const slope = layout.q === 2 || d.subjectEffects === 'slope';
	if (slope || (isSerial(d) && d.errors.along === 'time')) parts.push(o.time.join());
	if (
		d.visitEffects ||
		d.errors.along === 'visit' ||
		d.errors.varianceBy === 'visit' ||
		layout.shape >= 0
	)
		parts.push(o.visit.join());
	if (d.errors.varianceBy === 'group') parts.push(String(o.group));
	return parts.join('|');
}
