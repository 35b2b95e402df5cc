import jstat from 'jstat';
import { incompleteBeta } from './incomplete-beta.js';
import { incompleteGamma } from './incomplete-gamma.js';
import { halfDeviance, logGamma, stirlingRemainder } from './log-gamma.js';
import { quantileFromTails } from './quantile.js';
import { normalUpperQuantile } from './distribution-normal.js';

const { chisquare, studentt } = jstat.jStat ?? jstat;
/** Where jstat's quantiles have their seven or eight digits: a start that leaves one or two steps to make. */
const central = (tail: number, df: number) => tail > 1e-6 && df >= 1 && df <= 1e5;

export {
	normalAbove,
	normalBelow,
	normalDensity,
	normalQuantile,
	normalUpperQuantile
} from './distribution-normal.js';

/**
 * Two-sided tail area P(|T| ≥ |t|) of Student's t; unitless.
 *
 * I_x(df/2, 1/2) with x = df / (df + t²): the tail is computed as itself, never as 1 − area, so it keeps
 * its digits down to the smallest number that can be held.
 * jstat's `studentt.cdf` subtracts nearly equal numbers when |t| is large (at t = 1e8, df = 10 it is wrong by 40 %).
 * Source: NIST Digital Library of Mathematical Functions, 8.17; Abramowitz & Stegun 26.7.1.
 */
export function studentTwoSidedP(t: number, df: number): number {
	const square = t * t;
	if (!Number.isFinite(square)) return 0;
	return incompleteBeta(df / (df + square), square / (df + square), df / 2, 0.5);
}

/** Area of Student's t above `t`, computed as itself in the upper tail. */
export function studentAbove(t: number, df: number): number {
	const half = studentTwoSidedP(t, df) / 2;
	return t > 0 ? half : 1 - half;
}

function studentDensity(t: number, df: number): number {
	const apart = stirlingRemainder((df + 1) / 2) - stirlingRemainder(df / 2);
	const ratio = Math.exp(apart - 0.5 + (df / 2) * Math.log1p(1 / df));
	return (ratio / Math.sqrt(2 * Math.PI)) * Math.exp((-(df + 1) / 2) * Math.log1p((t * t) / df));
}

/** The t beyond which, on both sides together, 1 − `confidence` of Student's distribution lies; unitless. */
export function studentQuantile(confidence: number, df: number): number {
	return studentUpperQuantile((1 - confidence) / 2, df);
}

/**
 * The t above which an area `tail` of Student's distribution lies, 0 < tail < 1.
 *
 * jstat's `studentt.inv` is good to about seven digits and fails in the far tail: where it is good it gives the start,
 * and Newton's steps on the logarithm of the exact tail bring the other digits.
 */
export function studentUpperQuantile(tail: number, df: number): number {
	if (tail === 0.5) return 0;
	if (tail > 0.5) return -studentUpperQuantile(1 - tail, df);
	// Elsewhere two starts that lie on either side for heavy and light tails: the normal's, and the tail's power law.
	const power = Math.exp(
		(-Math.log(tail * df) +
			logGamma((df + 1) / 2) -
			logGamma(df / 2) -
			0.5 * Math.log(Math.PI) +
			(df / 2) * Math.log(df)) /
			df
	);
	return quantileFromTails({
		above: (t) => studentTwoSidedP(t, df) / 2,
		density: (t) => studentDensity(t, df),
		tail,
		start: central(tail, df)
			? studentt.inv(1 - tail, df)
			: df < 3
				? power
				: normalUpperQuantile(tail) * (1 + 1 / df)
	});
}

/** Areas of the chi-squared distribution on `df` degrees of freedom below and above x. */
export function chiSquareAreas(x: number, df: number): { below: number; above: number } {
	return incompleteGamma(df / 2, x / 2);
}

/** Area of the chi-squared distribution above x: the p-value of a likelihood ratio. */
export function chiSquareAbove(x: number, df: number): number {
	return chiSquareAreas(x, df).above;
}

function chiSquareDensity(x: number, df: number): number {
	const a = df / 2;
	return (
		(Math.exp(-halfDeviance(a, x / 2) - stirlingRemainder(a)) * Math.sqrt(a / (2 * Math.PI))) / x
	);
}

/**
 * The value below which `probability` of the chi-squared distribution lies; unitless.
 *
 * jstat's `chisquare.inv` stops at eight or nine digits and is 0 for small probabilities on few df: it gives a start.
 */
export function chiSquareQuantile(probability: number, df: number): number {
	return probability > 0.5
		? chiSquareUpperQuantile(1 - probability, df)
		: chiSquareLower(probability, df);
}

/** The value above which an area `tail` of the chi-squared distribution lies. */
export function chiSquareUpperQuantile(tail: number, df: number): number {
	if (tail > 0.5) return chiSquareLower(1 - tail, df);
	return quantileFromTails({
		above: (x) => chiSquareAreas(x, df).above,
		density: (x) => chiSquareDensity(x, df),
		tail,
		start: central(tail, df)
			? chisquare.inv(1 - tail, df)
			: wilsonHilferty(normalUpperQuantile(tail), df)
	});
}

function chiSquareLower(probability: number, df: number): number {
	if (probability === 0) return 0;
	const small = Math.exp((Math.log(probability) + logGamma(df / 2 + 1)) / (df / 2)) * 2;
	return quantileFromTails({
		below: (x) => chiSquareAreas(x, df).below,
		density: (x) => chiSquareDensity(x, df),
		tail: probability,
		start: Math.max(small, wilsonHilferty(-normalUpperQuantile(probability), df))
	});
}

/** Wilson & Hilferty (1931), PNAS 17:684-688: a first guess, never below a small positive number. */
function wilsonHilferty(z: number, df: number): number {
	const a = 2 / (9 * df);
	const root = 1 - a + z * Math.sqrt(a);
	return df * Math.max(root, 1e-3) ** 3;
}

/** Area of the F distribution on `df1` and `df2` degrees of freedom above f, computed as itself. */
export function fAbove(f: number, df1: number, df2: number): number {
	if (f <= 0) return 1;
	const scaled = df1 * f;
	if (!Number.isFinite(scaled)) return 0;
	const x = df2 / (df2 + scaled);
	return incompleteBeta(x, scaled / (df2 + scaled), df2 / 2, df1 / 2);
}

/** Area of the F distribution below f, computed as itself. */
export function fBelow(f: number, df1: number, df2: number): number {
	return f <= 0 ? 0 : fAbove(1 / f, df2, df1);
}

function fDensity(f: number, df1: number, df2: number): number {
	const [a, b] = [df1 / 2, df2 / 2];
	const n = a + b;
	const x = (df1 * f) / (df1 * f + df2);
	const complement = df2 / (df1 * f + df2);
	const front =
		Math.exp(
			stirlingRemainder(n) -
				stirlingRemainder(a) -
				stirlingRemainder(b) -
				halfDeviance(a, n * x) -
				halfDeviance(b, n * complement)
		) * Math.sqrt((a / (2 * Math.PI)) * (b / n));
	return front / f;
}

/** The f above which an area `tail` of the F distribution lies, 0 < tail < 1. */
export function fUpperQuantile(tail: number, df1: number, df2: number): number {
	if (tail > 0.5) return 1 / fUpperQuantile(1 - tail, df2, df1);
	return quantileFromTails({
		above: (f) => fAbove(f, df1, df2),
		density: (f) => fDensity(f, df1, df2),
		tail,
		start: 1
	});
}
