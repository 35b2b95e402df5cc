import { StatsError } from '../errors.js';
import { minimise } from '../numeric/minimise.js';
import type { Method, Supervision } from '../types.js';
import type { CrossProducts } from './cross-products.js';
import { atRatio, profileDeviance, profileSlope, type AtRatio } from './objective.js';

export interface Search {
	at: AtRatio;
	/** The ratio is exactly zero. */
	boundary: boolean;
	/** Newton step to the optimum in units of the profile's own curvature; 0 on the boundary. */
	gradient: number;
	converged: boolean;
	/** Evaluations of the likelihood. */
	iterations: number;
}

/** The search runs in log(1 + ratio): even steps near zero, even factors far out. This is a ratio of 1e8. */
const FURTHEST = Math.log1p(1e8);
const GRID = 48;
const CONVERGED = 1e-5;

/**
 * The variance ratio at which −2 log-likelihood is lowest, zero included.
 *
 * The profile may have more than one valley, so a grid is walked first and each valley it shows searched;
 * Newton steps on the analytic slope then bring the last digits.
 * Errors: `no-residual-variation` when the ratio runs off to infinity, `stopped`.
 */
export function searchRatio(
	products: CrossProducts,
	method: Method,
	supervision: Supervision = {}
): Search {
	let iterations = 0;
	const evaluate = (x: number): number => {
		iterations++;
		return profileDeviance(atRatio(products, method, Math.expm1(x)));
	};
	const grid: { x: number; value: number }[] = [];
	for (let i = 0; i <= GRID; i++) {
		if (supervision.shouldStop?.()) throw new StatsError('stopped', 'The fit was stopped.');
		const x = (FURTHEST * i) / GRID;
		grid.push({ x, value: evaluate(x) });
		supervision.onProgress?.((0.8 * i) / GRID);
	}
	let best = grid[0]!;
	grid.forEach((point, i) => {
		const before = grid[i - 1];
		const after = grid[i + 1];
		if ((before && before.value < point.value) || (after && after.value < point.value)) return;
		const found = minimise(evaluate, before?.x ?? point.x, after?.x ?? point.x);
		if (found.value < best.value) best = found;
		if (point.value < best.value) best = point;
	});
	if (best.x > FURTHEST * (1 - 1 / GRID)) {
		throw new StatsError(
			'no-residual-variation',
			'Within subjects the mean explains the outcomes (almost) exactly, so the residual variance cannot be estimated beside a lasting offset.'
		);
	}
	const polished = polish(products, method, Math.expm1(best.x));
	supervision.onProgress?.(1);
	return { ...polished, iterations: iterations + polished.steps };
}

function polish(products: CrossProducts, method: Method, start: number) {
	let at = atRatio(products, method, start);
	let slope = profileSlope(products, method, at);
	let steps = 1;
	// A minimiser that compares values cannot tell zero from 1e-8; the slope at zero can.
	const zero = atRatio(products, method, 0);
	const atZero = profileSlope(products, method, zero).first;
	if (atZero >= 0 && profileDeviance(zero) <= profileDeviance(at)) {
		return { at: zero, boundary: true, gradient: 0, converged: true, steps };
	}
	for (; steps < 30 && slope.second > 0; steps++) {
		const ratio = at.ratio - slope.first / slope.second;
		if (!(ratio >= 0) || Math.abs(ratio - at.ratio) <= 1e-14 * (1 + ratio)) break;
		const next = atRatio(products, method, ratio);
		const nextSlope = profileSlope(products, method, next);
		if (Math.abs(nextSlope.first) >= Math.abs(slope.first)) break;
		at = next;
		slope = nextSlope;
	}
	const gradient = slope.second > 0 ? Math.abs(slope.first) / Math.sqrt(slope.second) : Infinity;
	return {
		at,
		boundary: false,
		// A number that JSON can hold.
		gradient: Math.min(gradient, Number.MAX_VALUE),
		converged: gradient < CONVERGED,
		steps
	};
}
