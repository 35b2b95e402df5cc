import { StatsError } from '../errors.js';
import { normalAbove, normalBelow, normalDensity } from '../numeric/distribution-normal.js';

/**
 * The score process B(t) of a trial, drift θ: B(t) ~ N(θt, t) with independent increments, and the paths of it
 * that have not yet stopped. Everything here is on the score scale: B(t) = z √t.
 *
 * Recursive numerical integration: Armitage, McPherson & Rowe (1969), JRSS A 132:235-244; Jennison & Turnbull
 * (2000), Group Sequential Methods, chapter 19.
 */
export interface Going {
	/** Information at which these paths stand. */
	at: number;
	/** Increasing scores. */
	scores: Float64Array;
	/** Sub-density × quadrature weight at each score: their sum is the probability of still going. */
	mass: Float64Array;
}

/** Nodes of one Gauss–Legendre panel; a panel is at most `PANEL` standard deviations of the steps beside it. */
const NODES = 20;
const PANEL = 6;
/** More nodes than this at one look mean that looks lie closer together than can be told apart. */
const MOST_NODES = 60_000;
const LOG_DENSITY_AT_ZERO = -0.9189385332046728;

const rule = gaussLegendre(NODES);

/** Nodes and weights of Gauss–Legendre quadrature on −1 to 1. Source: NIST DLMF 3.5(v), nodes by Newton's steps. */
function gaussLegendre(n: number): { nodes: Float64Array; weights: Float64Array } {
	const nodes = new Float64Array(n);
	const weights = new Float64Array(n);
	for (let i = 0; i < n; i++) {
		let x = -Math.cos((Math.PI * (i + 0.75)) / (n + 0.5));
		let slope = 1;
		for (let step = 0; step < 100; step++) {
			let [before, value] = [1, x];
			for (let k = 2; k <= n; k++)
				[before, value] = [value, ((2 * k - 1) * x * value - (k - 1) * before) / k];
			slope = (n * (x * value - before)) / (x * x - 1);
			const change = value / slope;
			x -= change;
			if (Math.abs(change) < 1e-16) break;
		}
		nodes[i] = x;
		weights[i] = 2 / ((1 - x * x) * slope * slope);
	}
	return { nodes, weights };
}

/** All paths before the first look. */
export function start(): Going {
	return { at: 0, scores: Float64Array.of(0), mass: Float64Array.of(1) };
}

/** Probability of still going and being above `score` at information `at`. */
export function probabilityAbove(going: Going, at: number, drift: number, score: number): number {
	const gap = at - going.at;
	const sd = Math.sqrt(gap);
	const shifted = score - drift * gap;
	let sum = 0;
	for (let j = 0; j < going.mass.length; j++)
		sum += going.mass[j]! * normalAbove((shifted - going.scores[j]!) / sd);
	return sum;
}

/** Probability of still going and being below `score` at information `at`. */
export function probabilityBelow(going: Going, at: number, drift: number, score: number): number {
	const gap = at - going.at;
	const sd = Math.sqrt(gap);
	const shifted = score - drift * gap;
	let sum = 0;
	for (let j = 0; j < going.mass.length; j++)
		sum += going.mass[j]! * normalBelow((shifted - going.scores[j]!) / sd);
	return sum;
}

/** Sub-density of the paths still going, at `score` and information `at`. */
export function densityAt(going: Going, at: number, drift: number, score: number): number {
	const gap = at - going.at;
	const sd = Math.sqrt(gap);
	const shifted = score - drift * gap;
	let sum = 0;
	for (let j = 0; j < going.mass.length; j++)
		sum += going.mass[j]! * normalDensity((shifted - going.scores[j]!) / sd);
	return sum / sd;
}

/** Probability of still going. */
export function probabilityGoing(going: Going): number {
	let sum = 0;
	for (const m of going.mass) sum += m;
	return sum;
}

/**
 * The paths that are between `lower` and `upper` (scores, may be infinite) at information `at`.
 *
 * `next` is the information of the look after it: the nodes are laid as densely as the steps before and after
 * need. `reach` is how many standard deviations from the mean are kept; 9 leaves out 1e-19.
 */
export function goOn(
	going: Going,
	step: { at: number; next: number; drift: number; lower: number; upper: number; reach: number }
): Going {
	const { at, drift, reach } = step;
	const gap = at - going.at;
	const spread = reach * Math.sqrt(at);
	const from = Math.max(step.lower, drift * at - spread);
	const to = Math.min(step.upper, drift * at + spread);
	if (!(to > from)) return { at, scores: new Float64Array(0), mass: new Float64Array(0) };
	const finest = Math.sqrt(Math.min(gap, step.next - at));
	const panels = Math.max(1, Math.ceil((to - from) / (PANEL * finest)));
	const count = panels * NODES;
	if (!(count <= MOST_NODES))
		throw new StatsError(
			'out-of-range',
			`The looks at information ${at} and ${step.next} (or the one before) lie too close together to be told apart; leave one out.`,
			{ at, next: step.next }
		);
	const scores = new Float64Array(count);
	const mass = new Float64Array(count);
	const half = (to - from) / panels / 2;
	const sd = Math.sqrt(gap);
	let first = 0;
	let last = 0;
	for (let panel = 0, i = 0; panel < panels; panel++)
		for (let node = 0; node < NODES; node++, i++) {
			const score = from + half * (2 * panel + 1 + rule.nodes[node]!);
			const centre = score - drift * gap;
			while (first < going.scores.length && going.scores[first]! < centre - reach * sd) first++;
			while (last < going.scores.length && going.scores[last]! <= centre + reach * sd) last++;
			let sum = 0;
			for (let j = first; j < last; j++) {
				const x = (centre - going.scores[j]!) / sd;
				sum += going.mass[j]! * Math.exp(LOG_DENSITY_AT_ZERO - 0.5 * x * x);
			}
			scores[i] = score;
			mass[i] = (sum / sd) * half * rule.weights[node]!;
		}
	return { at, scores, mass };
}
