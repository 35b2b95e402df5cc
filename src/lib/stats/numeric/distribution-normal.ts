/**
 * The standard normal distribution, accurate in both tails; unitless.
 *
 * jstat's `normal.cdf` goes through 1 + erf, so that its lower tail is 0 below z = −8.3 and has lost half its
 * digits at −5; group-sequential boundaries live there. Hence these.
 */

const SQRT_TWO_PI = 2.5066282746310002;
/** Beyond it the tail area is below the smallest number that keeps all its digits. */
const FARTHEST = 38.5;

// Rational approximations of W. J. Cody (1969), Math. Comp. 23:631-637, for the normal integral; the
// coefficients are those of Cody (1993), ACM TOMS 19:22-32 (algorithm 715), from memory and checked in the test
// against values of forty digits.
const CENTRE_TOP = [
	0.06568233791820745, 2.2352520354606837, 161.02823106855587, 1067.6894854603709, 18154.98125334356
];
const CENTRE_BOTTOM = [
	1, 47.202581904688245, 976.0985517377767, 10260.932208618979, 45507.78933502673
];
const MIDDLE_TOP = [
	1.0765576773720192e-8, 0.39894151208813466, 8.883149794388377, 93.50665613217785,
	597.2702763948002, 2494.5375852903726, 6848.190450536283, 11602.65143764735, 9842.714838383978
];
const MIDDLE_BOTTOM = [
	1, 22.266688044328117, 235.387901782625, 1519.3775994075547, 6485.558298266761,
	18615.571640885097, 34900.95272114598, 38912.00328609327, 19685.429676859992
];
const FAR_TOP = [
	0.023073441764940174, 0.215898534057957, 0.12740116116024736, 0.022235277870649807,
	0.0014216191932278934, 2.9112874951168793e-5
];
const FAR_BOTTOM = [
	1, 1.284260096144911, 0.4682382124808651, 0.06598813786892856, 0.0037823963320275824,
	7.297515550839662e-5
];

function polynomial(coefficients: readonly number[], x: number): number {
	let value = coefficients[0]!;
	for (let i = 1; i < coefficients.length; i++) value = value * x + coefficients[i]!;
	return value;
}

/** exp(−z²/2) with the square split, so that its rounding does not grow with z. */
function bell(z: number): number {
	const rounded = Math.trunc(z * 16) / 16;
	return Math.exp((-rounded * rounded) / 2) * Math.exp((-(z - rounded) * (z + rounded)) / 2);
}

/** Φ(z) − 1/2 for |z| ≤ 0.67448975. */
function centre(z: number): number {
	const square = z * z;
	return (z * polynomial(CENTRE_TOP, square)) / polynomial(CENTRE_BOTTOM, square);
}

/** Density of the standard normal distribution at z. */
export function normalDensity(z: number): number {
	const size = Math.abs(z);
	return size > 40 ? 0 : bell(size) / SQRT_TWO_PI;
}

/**
 * Area of the standard normal distribution above z; relative error below 1e-14 down to 1e-300, 0 beyond z = 38.5.
 *
 * Source: Cody (1969), Math. Comp. 23:631-637.
 */
export function normalAbove(z: number): number {
	const size = Math.abs(z);
	if (size <= 0.67448975) return 0.5 - centre(z);
	if (size > FARTHEST) return z > 0 ? 0 : 1;
	let tail: number;
	if (size <= 5.656854249492381) {
		tail = (bell(size) * polynomial(MIDDLE_TOP, size)) / polynomial(MIDDLE_BOTTOM, size);
	} else {
		const inverse = 1 / (size * size);
		const rest = (inverse * polynomial(FAR_TOP, inverse)) / polynomial(FAR_BOTTOM, inverse);
		tail = (bell(size) * (1 / SQRT_TWO_PI - rest)) / size;
	}
	return z > 0 ? tail : 1 - tail;
}

/** Area of the standard normal distribution below z, as accurate in its tail as `normalAbove`. */
export function normalBelow(z: number): number {
	return normalAbove(-z);
}

/**
 * The z above which an area `tail` of the standard normal distribution lies, 0 < tail < 1; ±Infinity at 0 and 1.
 *
 * A start good to 4e-4 (Abramowitz & Stegun 26.2.23), then Halley's steps on the tail itself, or on the area
 * from the middle when z is near 0, where the tail no longer tells.
 */
export function normalUpperQuantile(tail: number): number {
	if (!(tail > 0)) return tail === 0 ? Infinity : NaN;
	if (!(tail < 1)) return tail === 1 ? -Infinity : NaN;
	if (tail > 0.5) return -quantileAbove(1 - tail, tail - 0.5);
	return quantileAbove(tail, 0.5 - tail);
}

/** The z below which `probability` of the standard normal distribution lies; ±Infinity at 0 and 1. */
export function normalQuantile(probability: number): number {
	return -normalUpperQuantile(probability);
}

/** For tail ≤ 1/2, with `fromMiddle` = 1/2 − tail, exactly. */
function quantileAbove(tail: number, fromMiddle: number): number {
	if (fromMiddle === 0) return 0;
	const r = Math.sqrt(-2 * Math.log(tail));
	let z =
		r -
		polynomial([0.010328, 0.802853, 2.515517], r) /
			polynomial([0.001308, 0.189269, 1.432788, 1], r);
	for (let step = 0; step < 12; step++) {
		const error = z < 0.67448975 ? fromMiddle - centre(z) : normalAbove(z) - tail;
		const newton = error / normalDensity(z);
		const change = newton / (1 - (z * newton) / 2);
		z += change;
		if (Math.abs(change) <= 4e-16 * Math.abs(z)) break;
	}
	return z;
}
