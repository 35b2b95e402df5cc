import type { ModelDesign } from '../design/model-design.js';
import type { Dependence } from '../plan.js';

/** Where each kind of working parameter begins in the vector the search moves; −1 when the model has none. */
export interface Layout {
	dependence: Dependence;
	/** Working parameters. */
	count: number;
	/** Columns of Z: 0, 1 or 2. */
	q: number;
	/** Cholesky entries of the subject effects' covariance in units of σ²: level; slope; level, covariance, slope. */
	subject: number;
	/** Square root of the visit variance in units of σ². */
	visit: number;
	/** log(range / gapUnit) along time, artanh ρ along visits. */
	range: number;
	/** The share of noise is sin² of it. */
	share: number;
	/** log of the standard deviation ÷ that of the first class, for each class but the first. */
	scale: number;
	/** Compound symmetry: 1; Toeplitz: K − 1 partial autocorrelations; unstructured: K(K + 1)/2 − 1 entries. */
	shape: number;
	/** Standard deviations that differ: 1, or the number of visits or groups. */
	scaleClasses: number;
	/** Visits of the design, or the most rows of a subject when compound symmetry needs no visits. */
	positions: number;
	/** Whether a position is a visit, or the place of a row within its subject. */
	positionsAreVisits: boolean;
	/** The most rows one subject has. */
	mostPerSubject: number;
	/** Median gap between neighbouring rows of a subject; time unit. */
	gapUnit: number;
	/** Smallest positive gap and longest follow-up; time unit. */
	smallestGap: number;
	longestSpan: number;
	/** Slopes are per (time − origin) / unit inside; the origin is 0 where the model is not free to move it. */
	timeOrigin: number;
	timeUnit: number;
}

/** The dense kernel is for structures that are a matrix over visits; all others have a recursion. */
export const isMatrixStructure = (d: Dependence): boolean =>
	d.errors.structure === 'compound-symmetry' ||
	d.errors.structure === 'toeplitz' ||
	d.errors.structure === 'unstructured';

export const isSerial = (d: Dependence): boolean =>
	d.errors.structure === 'serial' || d.errors.structure === 'serial-with-noise';

const columnsOfZ = {
	none: 0,
	level: 1,
	slope: 1,
	'level-and-slope': 2,
	'level-and-slope-uncorrelated': 2
};

function gapsOf(design: ModelDesign) {
	const gaps: number[] = [];
	let longest = 0;
	let most = 0;
	const { subjectStart: start, time } = design;
	// A few thousand gaps tell the median well enough; every one is looked at for the smallest.
	const stride = Math.max(1, Math.floor(design.n / 5000));
	let smallest = Infinity;
	for (let s = 0; s + 1 < start.length; s++) {
		const from = start[s]!;
		const to = start[s + 1]!;
		most = Math.max(most, to - from);
		longest = Math.max(longest, time[to - 1]! - time[from]!);
		for (let i = from + 1; i < to; i++) {
			const gap = time[i]! - time[i - 1]!;
			if (gap > 0 && gap < smallest) smallest = gap;
			if (gap > 0 && i % stride === 0) gaps.push(gap);
		}
	}
	gaps.sort((a, b) => a - b);
	const unit = gaps[Math.floor(gaps.length / 2)] ?? (Number.isFinite(smallest) ? smallest : 1);
	return {
		unit,
		smallest: Number.isFinite(smallest) ? smallest : unit,
		longest: longest || unit,
		most
	};
}

/** The working parameters of a model on a design. */
export function layoutOf(design: ModelDesign, dependence: Dependence): Layout {
	const { subjectEffects, errors } = dependence;
	const q = columnsOfZ[subjectEffects];
	const gaps = gapsOf(design);
	const byVisit = errors.structure !== 'compound-symmetry' || errors.varianceBy === 'visit';
	const positionsAreVisits = byVisit && design.visits.length > 0;
	const positions = positionsAreVisits ? design.visits.length : gaps.most;
	const classes =
		errors.varianceBy === 'visit'
			? design.visits.length
			: errors.varianceBy === 'group'
				? design.groups.length
				: 1;
	const scaleClasses = errors.structure === 'unstructured' ? 1 : Math.max(1, classes);
	let mean = 0;
	for (const t of design.time) mean += t / design.n;
	const timeOrigin = subjectEffects === 'level-and-slope' ? mean : 0;
	let square = 0;
	for (const t of design.time) square += (t - timeOrigin) ** 2 / design.n;
	let count = 0;
	const take = (k: number) => {
		const at = k > 0 ? count : -1;
		count += k;
		return at;
	};
	const shapes =
		errors.structure === 'compound-symmetry'
			? 1
			: errors.structure === 'toeplitz'
				? positions - 1
				: errors.structure === 'unstructured'
					? (positions * (positions + 1)) / 2 - 1
					: 0;
	return {
		dependence,
		q,
		subject: take(subjectEffects === 'level-and-slope' ? 3 : q),
		visit: take(dependence.visitEffects ? 1 : 0),
		range: take(isSerial(dependence) ? 1 : 0),
		share: take(errors.structure === 'serial-with-noise' ? 1 : 0),
		scale: take(scaleClasses - 1),
		shape: take(shapes),
		count,
		scaleClasses,
		positions,
		positionsAreVisits,
		mostPerSubject: gaps.most,
		gapUnit: gaps.unit,
		smallestGap: gaps.smallest,
		longestSpan: gaps.longest,
		timeOrigin,
		timeUnit: square > 0 ? Math.sqrt(square) : 1
	};
}

/** Covariance of the subject effects in units of σ² and of the inner time: q × q, row-major. */
export function subjectCovariance(layout: Layout, x: Float64Array): Float64Array {
	const at = layout.subject;
	if (layout.q === 0) return new Float64Array(0);
	if (layout.q === 1) return Float64Array.of(x[at]! ** 2);
	if (layout.dependence.subjectEffects === 'level-and-slope') {
		const [a, b, d] = [x[at]!, x[at + 1]!, x[at + 2]!];
		return Float64Array.of(a * a, a * b, a * b, b * b + d * d);
	}
	return Float64Array.of(x[at]! ** 2, 0, 0, x[at + 1]! ** 2);
}

/** Adds to `slope` what ∂/∂G (q × q, symmetric) comes to in the Cholesky entries. */
export function addSubjectSlope(
	layout: Layout,
	x: Float64Array,
	g: Float64Array,
	slope: Float64Array
): void {
	const at = layout.subject;
	if (layout.q === 1) slope[at]! += 2 * x[at]! * g[0]!;
	else if (layout.dependence.subjectEffects === 'level-and-slope') {
		const [a, b, d] = [x[at]!, x[at + 1]!, x[at + 2]!];
		const off = (g[1]! + g[2]!) / 2;
		slope[at]! += 2 * a * g[0]! + 2 * b * off;
		slope[at + 1]! += 2 * a * off + 2 * b * g[3]!;
		slope[at + 2]! += 2 * d * g[3]!;
	} else if (layout.q === 2) {
		slope[at]! += 2 * x[at]! * g[0]!;
		slope[at + 1]! += 2 * x[at + 1]! * g[3]!;
	}
}
