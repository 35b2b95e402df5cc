/** A function to be made small, with its slope; null where it has no value. */
export type WithSlope = (x: Float64Array) => { value: number; slope: Float64Array } | null;

export interface Descent {
	x: Float64Array;
	value: number;
	slope: Float64Array;
	/** Approximate inverse of the second derivatives, k × k row-major. */
	inverse: Float64Array;
	/** √(g'Bg): the slope in units of the curvature met on the way. */
	gradient: number;
	converged: boolean;
	evaluations: number;
}

export interface DescentOptions {
	/** Ends when √(g'Bg) is below it. */
	tolerance: number;
	most: number;
	/** Starts the approximate inverse; the unit matrix scaled to the first step when left out. */
	inverse?: Float64Array;
	/** No step changes a coordinate by more than this times 1 + half the largest coordinate. */
	longest: number;
	/** Asked before each step; throws when the work is to end. */
	beforeStep?: (evaluations: number) => void;
}

/** Length of the first step, before anything is known of the curvature: short, so as not to leave the valley. */
const FIRST = 0.25;

const dot = (a: Float64Array, b: Float64Array) => {
	let sum = 0;
	for (let i = 0; i < a.length; i++) sum += a[i]! * b[i]!;
	return sum;
};

function times(b: Float64Array, v: Float64Array): Float64Array {
	const k = v.length;
	const result = new Float64Array(k);
	for (let i = 0; i < k; i++) for (let j = 0; j < k; j++) result[i]! += b[i * k + j]! * v[j]!;
	return result;
}

/** B ← (I − ρ s y')B(I − ρ y s') + ρ s s', ρ = 1/y's. */
function update(b: Float64Array, s: Float64Array, y: Float64Array, ys: number): void {
	const k = s.length;
	const by = times(b, y);
	const factor = (1 + dot(y, by) / ys) / ys;
	for (let i = 0; i < k; i++)
		for (let j = 0; j < k; j++)
			b[i * k + j]! += factor * s[i]! * s[j]! - (by[i]! * s[j]! + s[i]! * by[j]!) / ys;
}

const unit = (k: number, scale: number) => {
	const b = new Float64Array(k * k);
	for (let i = 0; i < k; i++) b[i * k + i] = scale;
	return b;
};

/**
 * The lowest point found by quasi-Newton steps from `start`; null when the function has no value there.
 *
 * Steps are halved, or shortened by a cubic through both ends, until the value falls enough. Close to the optimum,
 * where values differ by rounding only, a step counts when the slope along it shrinks.
 * Source: Nocedal & Wright (2006), Numerical Optimization, 2nd ed., algorithm 6.1; Hager & Zhang (2005), SIAM J.
 * Optim. 16:170-192, for the test by slope.
 */
export function descend(
	f: WithSlope,
	start: Float64Array,
	options: DescentOptions
): Descent | null {
	const k = start.length;
	let evaluations = 1;
	const first = f(start);
	if (!first) return null;
	let x: Float64Array = start.slice();
	let { value, slope } = first;
	let given = options.inverse !== undefined;
	let b: Float64Array =
		options.inverse?.slice() ?? unit(k, FIRST / Math.max(1, Math.sqrt(dot(slope, slope))));
	let restarted = false;
	for (;;) {
		options.beforeStep?.(evaluations);
		let step = times(b, slope);
		for (let i = 0; i < k; i++) step[i] = -step[i]!;
		let along = dot(step, slope);
		if (!(along <= 0)) {
			b = unit(k, FIRST / Math.max(1, Math.sqrt(dot(slope, slope))));
			step = slope.map((g, i) => -g * b[i * k + i]!);
			along = dot(step, slope);
		}
		const gradient = Math.sqrt(-along);
		const done = (converged: boolean): Descent => ({
			x,
			value,
			slope,
			inverse: b,
			gradient,
			converged,
			evaluations
		});
		if (k === 0 || gradient <= options.tolerance) return done(true);
		if (evaluations >= options.most) return done(false);
		let largest = 0;
		for (let i = 0; i < k; i++) largest = Math.max(largest, Math.abs(step[i]!));
		let reach = 0;
		for (let i = 0; i < k; i++) reach = Math.max(reach, Math.abs(x[i]!));
		let t = Math.min(1, (options.longest * (1 + reach / 2)) / largest);
		// Sums over a million rows lose some twelve digits.
		const noise = 2e-12 * (1 + Math.abs(value));
		let found: { x: Float64Array; value: number; slope: Float64Array } | null = null;
		for (let tries = 0; tries < 30; tries++) {
			const next = x.map((v, i) => v + t * step[i]!);
			const at = f(next);
			evaluations++;
			if (at && Number.isFinite(at.value)) {
				const slopeThere = dot(at.slope, step);
				const falls = at.value <= value + 1e-4 * t * along;
				const flat = at.value <= value + noise && Math.abs(slopeThere) <= 0.9 * Math.abs(along);
				if (falls || flat) {
					found = { x: next, ...at };
					break;
				}
				// The cubic through both values and slopes.
				const d = along + slopeThere - (3 * (at.value - value)) / t;
				const root = d * d - along * slopeThere;
				const cubic =
					root >= 0
						? t *
							(1 - (slopeThere + Math.sqrt(root) - d) / (slopeThere - along + 2 * Math.sqrt(root)))
						: t / 2;
				t = cubic > 0.1 * t && cubic < 0.6 * t ? cubic : t / 3;
			} else t /= 4;
			if (evaluations >= options.most) break;
		}
		if (!found) {
			if (restarted) return done(gradient <= 1e3 * options.tolerance);
			restarted = true;
			given = false;
			b = unit(k, FIRST / Math.max(1, Math.sqrt(dot(slope, slope))));
			continue;
		}
		restarted = false;
		const s = found.x.map((v, i) => v - x[i]!);
		const y = found.slope.map((v, i) => v - slope[i]!);
		const ys = dot(y, s);
		if (ys > 1e-12 * Math.sqrt(dot(y, y) * dot(s, s))) {
			if (!given) {
				b = unit(k, ys / dot(y, y));
				given = true;
			}
			update(b, s, y, ys);
		}
		x = found.x;
		value = found.value;
		slope = found.slope;
	}
}
