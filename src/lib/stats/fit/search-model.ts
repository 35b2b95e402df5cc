import { StatsError } from '../errors.js';
import { descend, type Descent } from '../numeric/quasi-newton.js';
import type { FitMethod } from '../plan.js';
import type { Supervision } from '../types.js';
import { edgesOf } from './edges.js';
import { objective, profileAt } from './objective-of.js';
import { thinned, type PreparedModel } from './prepare-model.js';
import { startingPoints } from './starts.js';

export interface Found {
	/** Working parameters at the optimum. */
	x: Float64Array;
	deviance: number;
	/** √(g'Bg) over the free parameters: the slope in standard deviations of the curvature met. */
	gradient: number;
	converged: boolean;
	/** Evaluations of the likelihood on all the data. */
	evaluations: number;
	/** Components at the edge, by name. */
	boundary: string[];
	/** Whether each working parameter was held at an edge. */
	held: boolean[];
}

export interface SearchOptions extends Supervision {
	/** Working parameters of a fit to like data: the search starts there and nowhere else. */
	start?: Float64Array;
	/** Inverse of the second derivatives of −2 log-likelihood near `start`, k × k: the search need not learn it. */
	inverse?: Float64Array;
	/** √(g'Bg) below which it has converged; 1e-6 unless said otherwise. */
	tolerance?: number;
	/** False: components near their edge are left where the search ends; for those who know the likelihood there. */
	edges?: boolean;
}

const MOST = 400;
/** Starts that are followed to the end where there may be several valleys. */
const STARTS = 8;
/** More subjects than this and the first look is at some of them only. */
const MANY = 1500;
const SOME = 500;

/** The longest a step may be in any working parameter: e² in a range, a tenfold in a ratio near 1. */
const LONGEST = 2;

function refuseStop(supervision: Supervision): void {
	if (supervision.shouldStop?.()) throw new StatsError('stopped', 'The fit was stopped.');
}

/** A ratio of variances above this is no ratio: nothing is left below it. */
const ENDLESS = 1e8;

/** Errors: `no-residual-variation`. */
function refuseEndless({ layout, dependence }: PreparedModel, x: Float64Array): void {
	const entries = dependence.subjectEffects === 'level-and-slope' ? 3 : layout.q;
	const ratios = Array.from({ length: entries }, (_, i) => x[layout.subject + i]! ** 2);
	if (layout.visit >= 0) ratios.push(x[layout.visit]! ** 2);
	const serialForever =
		layout.range >= 0 &&
		layout.share < 0 &&
		dependence.errors.along === 'time' &&
		layout.gapUnit * Math.exp(x[layout.range]!) > 1e7 * layout.longestSpan;
	if (serialForever || ratios.some((r) => r > ENDLESS)) {
		throw new StatsError(
			'no-residual-variation',
			'The other parts of the model explain the outcomes (almost) exactly, so no residual variance is left to estimate beside them. Leave a part out.'
		);
	}
}

/** The objective over the coordinates that are free, the others as in `x`. */
function restricted(prepared: PreparedModel, method: FitMethod, x: Float64Array, free: number[]) {
	const f = objective(prepared, method);
	const top = Math.log((prepared.layout.longestSpan * 1e7) / prepared.layout.gapUnit);
	const { range } = prepared.layout;
	const along = prepared.dependence.errors.along;
	return {
		f: (part: Float64Array) => {
			const full = x.slice();
			free.forEach((i, k) => (full[i] = part[k]!));
			if (range >= 0 && along === 'time' && Math.abs(full[range]!) > top + 40) return null;
			const at = f(full);
			return at && { value: at.value, slope: Float64Array.from(free, (i) => at.slope[i]!) };
		},
		start: Float64Array.from(free, (i) => x[i]!),
		full: (part: Float64Array) => {
			const full = x.slice();
			free.forEach((i, k) => (full[i] = part[k]!));
			return full;
		}
	};
}

/** The best of the starting points, those near it in value searched to the end; on `prepared` itself. */
function firstDescent(
	prepared: PreparedModel,
	method: FitMethod,
	tolerance: number,
	supervision: Supervision
): { descent: Descent; evaluations: number } | null {
	const f = objective(prepared, method);
	let evaluations = 0;
	const points = startingPoints(prepared)
		.map((x) => {
			refuseStop(supervision);
			evaluations++;
			return { x, value: profileAt(prepared, method, x)?.deviance ?? Infinity };
		})
		.filter(({ value }) => Number.isFinite(value))
		.sort((a, b) => a.value - b.value);
	let best: Descent | null = null;
	const { range, share, scale } = prepared.layout;
	const chosen = points.slice(0, 1);
	// Serial errors may have several valleys: one start for each way of fading, the best few of them.
	if (range >= 0)
		for (const point of points) {
			const other = ({ x }: { x: Float64Array }) =>
				x[range] !== point.x[range] ||
				(share >= 0 && x[share] !== point.x[share]) ||
				(scale >= 0 && x[scale] !== point.x[scale]);
			if (chosen.length < STARTS && chosen.every(other)) chosen.push(point);
		}
	for (const { x } of chosen) {
		const found = descend(f, x, {
			tolerance,
			most: MOST,
			longest: LONGEST,
			beforeStep: () => refuseStop(supervision)
		});
		if (!found) continue;
		evaluations += found.evaluations;
		if (!best || found.value < best.value - 1e-9) best = found;
	}
	return best && { descent: best, evaluations };
}

/**
 * The working parameters at which −2 log-likelihood is lowest, edges of the parameter space included.
 *
 * Many subjects: found on some of them first, then on all. A component that costs nothing to leave out (less than
 * 1e-7 in −2 log-likelihood) is put on its edge, and the others are searched again. Deterministic.
 * Errors: `stopped`, `out-of-range` when no starting point has a likelihood.
 */
export function searchModel(
	prepared: PreparedModel,
	method: FitMethod,
	options: SearchOptions = {}
): Found {
	const { layout } = prepared;
	const tolerance = options.tolerance ?? 1e-6;
	const subjects = prepared.rows.subjectStart.length - 1;
	options.onProgress?.(0);
	let descent: Descent | null = null;
	let evaluations = 0;
	const f = objective(prepared, method);
	const descendFrom = (x: Float64Array, inverse?: Float64Array) =>
		descend(f, x, {
			tolerance,
			most: MOST,
			longest: LONGEST,
			...(inverse ? { inverse } : {}),
			beforeStep: () => refuseStop(options)
		});
	if (options.start) descent = descendFrom(options.start, options.inverse);
	else if (subjects > MANY && layout.count > 0) {
		const some = firstDescent(thinned(prepared, SOME), method, 1e-4, options);
		if (some) {
			const share = SOME / subjects;
			descent = descendFrom(
				some.descent.x,
				some.descent.inverse.map((v) => v * share)
			);
		}
	}
	if (descent) evaluations += descent.evaluations;
	if (!descent || (!descent.converged && !options.start)) {
		const found = firstDescent(prepared, method, tolerance, options);
		evaluations += found?.evaluations ?? 0;
		if (found && (!descent || found.descent.value < descent.value)) descent = found.descent;
	}
	if (!descent) {
		throw new StatsError(
			'out-of-range',
			'The likelihood of this model cannot be computed anywhere near these data: a covariance matrix is singular at every starting point.'
		);
	}
	options.onProgress?.(0.8);

	let x = descent.x;
	let { value, gradient, converged } = descent;
	const held = new Array<boolean>(layout.count).fill(false);
	const boundary: string[] = [];
	const edges = options.edges === false ? [] : edgesOf(prepared);
	for (let again = true; again;) {
		again = false;
		for (const edge of edges) {
			if (boundary.includes(edge.name) || edge.fix.every(([i]) => held[i]) || !edge.near(x))
				continue;
			refuseStop(options);
			const moved = x.slice();
			for (const [i, v] of edge.fix) moved[i] = v;
			const at = profileAt(prepared, method, moved);
			evaluations++;
			if (!at) continue;
			let candidate = { x: moved, value: at.deviance, gradient, converged };
			if (at.deviance > value + 1e-7) {
				// Near the edge but not at it unless the others move along.
				if (at.deviance > value + 0.5) continue;
			}
			const free = held.flatMap((h, i) => (h || edge.fix.some(([k]) => k === i) ? [] : [i]));
			const rest = restricted(prepared, method, moved, free);
			const found = descend(rest.f, rest.start, {
				tolerance,
				most: MOST,
				longest: LONGEST,
				beforeStep: () => refuseStop(options)
			});
			if (found) {
				evaluations += found.evaluations;
				candidate = {
					x: rest.full(found.x),
					value: found.value,
					gradient: found.gradient,
					converged: found.converged
				};
			}
			if (candidate.value <= value + 1e-7) {
				({ x, value, gradient, converged } = candidate);
				for (const [i] of edge.fix) held[i] = true;
				boundary.push(edge.name);
				again = true;
				break;
			}
		}
	}
	refuseEndless(prepared, x);
	const { range, share } = layout;
	if (
		range >= 0 &&
		share >= 0 &&
		!held[range] &&
		prepared.dependence.errors.along === 'time' &&
		layout.gapUnit * Math.exp(x[range]!) > 1e4 * layout.longestSpan
	) {
		held[range] = true;
		boundary.push('range without end');
	}
	options.onProgress?.(1);
	return { x, deviance: value, gradient, converged, evaluations, boundary, held };
}
