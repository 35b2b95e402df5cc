import type { TimeInMean } from '../plan.js';
import { knotName, powerName, timeName, visitName } from './names.js';

/** An occasion: its time, and the position of its visit (0 without visits). */
export interface Occasion {
	time: number;
	visit: number;
}

/** One function of time in the mean, in the form the fit uses and in the form its coefficient is reported for. */
export interface TimeFunction {
	/** Of the reported coefficient. */
	name: string;
	/** Inside value at an occasion. */
	at: (time: number, visit: number) => number;
	/** Derivative of the inside value; null for visits, which have no slope. */
	slope: ((time: number) => number) | null;
	/** The reported function, on the data's own scale. */
	ownAt: (time: number, visit: number) => number;
	ownSlope: ((time: number) => number) | null;
	/** Inside value = `expansion[0]` + Σ `expansion[j]` × reported function j; null when the two are one. */
	expansion: number[] | null;
}

const same = (
	name: string,
	at: TimeFunction['at'],
	slope: TimeFunction['slope']
): TimeFunction => ({ name, at, slope, ownAt: at, ownSlope: slope, expansion: null });

function knotFunction(knot: number, throughZero: boolean): TimeFunction {
	const atZero = throughZero ? Math.max(0, -knot) : 0;
	return same(
		knotName(knot),
		(time) => Math.max(0, time - knot) - atZero,
		(time) => (time >= knot ? 1 : 0)
	);
}

/** Middle and half width of the observed times; the half width is 1 when there is one time only. */
function spanOf(times: Float64Array): { middle: number; half: number } {
	let from = Infinity;
	let to = -Infinity;
	for (const t of times) {
		if (t < from) from = t;
		if (t > to) to = t;
	}
	const half = to / 2 - from / 2;
	return { middle: to / 2 + from / 2, half: half > 0 ? half : 1 };
}

/** Coefficients of ((t − middle) / half)^power in powers of t. */
function expandPower(power: number, middle: number, half: number): number[] {
	let coefficients = [1];
	for (let k = 0; k < power; k++) {
		const next = new Array<number>(coefficients.length + 1).fill(0);
		coefficients.forEach((c, j) => {
			next[j]! -= (c * middle) / half;
			next[j + 1]! += c / half;
		});
		coefficients = next;
	}
	return coefficients;
}

/**
 * Powers of u = (t − middle) / half, which lie in −1 to 1 and so keep their digits, where powers of a time counted from
 * a far origin would not. Through zero: (t / half) · u^(power − 1), which spans the polynomials that vanish at time 0.
 */
function powerFunction(
	power: number,
	{ middle, half }: { middle: number; half: number },
	throughZero: boolean
): TimeFunction {
	const u = (time: number) => (time - middle) / half;
	const own = (time: number) => time ** power;
	const ownSlope = (time: number) => power * time ** (power - 1);
	const inside = throughZero
		? {
				at: (time: number) => (time / half) * u(time) ** (power - 1),
				slope: (time: number) =>
					(u(time) ** (power - 1) +
						(power > 1 ? ((power - 1) * time * u(time) ** (power - 2)) / half : 0)) /
					half,
				expansion: [0, ...expandPower(power - 1, middle, half).map((c) => c / half)]
			}
		: {
				at: (time: number) => u(time) ** power,
				slope: (time: number) => (power * u(time) ** (power - 1)) / half,
				expansion: expandPower(power, middle, half)
			};
	return { name: powerName(power), ownAt: own, ownSlope, ...inside };
}

/**
 * The functions of time in the mean, beside the intercept.
 *
 * `times`: those of the rows in use, data's unit; `visits`: labels in order. `throughZero` asks for functions that vanish
 * at time 0 (at the first visit), for groups that start equal.
 * Source: truncated lines for piecewise linear, as in Ruppert, Wand & Carroll (2003), Semiparametric Regression, 3.3.
 */
export function timeFunctions(
	kind: TimeInMean,
	times: Float64Array,
	visits: readonly string[],
	throughZero: boolean
): TimeFunction[] {
	if (kind === 'none') return [];
	if (kind === 'categorical') {
		return visits
			.slice(1)
			.map((label, i) => same(visitName(label), (_, v) => (v === i + 1 ? 1 : 0), null));
	}
	const straight = same(
		timeName,
		(time) => time,
		() => 1
	);
	if (kind === 'linear') return [straight];
	if ('knots' in kind) {
		const knots = [...kind.knots].sort((a, b) => a - b);
		return [straight, ...knots.map((knot) => knotFunction(knot, throughZero))];
	}
	if (kind.degree === 1) return [straight];
	const span = spanOf(times);
	return Array.from({ length: kind.degree }, (_, i) => powerFunction(i + 1, span, throughZero));
}
