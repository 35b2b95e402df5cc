import jstat from 'jstat';
import { incompleteBeta } from './incomplete-beta.js';

const { gammaln, normal, chisquare, studentt } = jstat.jStat ?? jstat;

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

function studentDensity(t: number, df: number): number {
	const logDensity =
		gammaln((df + 1) / 2) -
		gammaln(df / 2) -
		0.5 * Math.log(df * Math.PI) -
		((df + 1) / 2) * Math.log1p((t * t) / df);
	return Math.exp(logDensity);
}

/**
 * The t beyond which, on both sides together, 1 − `confidence` of Student's distribution lies; unitless.
 *
 * jstat's `studentt.inv` is good to about seven digits; Newton steps on the exact tail bring the rest.
 */
export function studentQuantile(confidence: number, df: number): number {
	const tail = 1 - confidence;
	let t = studentt.inv(1 - tail / 2, df);
	if (!Number.isFinite(t) || t <= 0) t = normalQuantile(1 - tail / 2);
	for (let step = 0; step < 50; step++) {
		const change = (studentTwoSidedP(t, df) - tail) / (2 * studentDensity(t, df));
		// Halving rather than crossing zero keeps the heavy tails of very small df from throwing it out.
		const next = t + change > 0 ? t + change : t / 2;
		if (Math.abs(next - t) <= 1e-14 * t) return next;
		t = next;
	}
	return t;
}

/** The z below which `probability` of the standard normal distribution lies; unitless. */
export function normalQuantile(probability: number): number {
	return normal.inv(probability, 0, 1);
}

/** The value below which `probability` of the chi-squared distribution lies; unitless. */
export function chiSquareQuantile(probability: number, df: number): number {
	return chisquare.inv(probability, df);
}
