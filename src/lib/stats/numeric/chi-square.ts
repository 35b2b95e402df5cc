import jstat from 'jstat';

const { gammaln } = jstat.jStat ?? jstat;

/**
 * P(χ² > x) with `df` degrees of freedom; unitless; 1 at x ≤ 0. Relative error about 1e-13, far into the tail.
 *
 * The upper incomplete gamma function: series below its middle, continued fraction above.
 * jstat's `chisquare.cdf` gives the lower tail, and 1 minus it is 0 from x = 70 on.
 * Source: NIST Digital Library of Mathematical Functions, 8.7.1, 8.9.2 and 8.11.
 */
export function chiSquareTail(x: number, df: number): number {
	if (!(x > 0)) return 1;
	const a = df / 2;
	const z = x / 2;
	const front = Math.exp(a * Math.log(z) - z - gammaln(a));
	if (z < a + 1) {
		let term = 1 / a;
		let sum = term;
		for (let k = 1; k < 1000 && term > sum * 1e-17; k++) {
			term *= z / (a + k);
			sum += term;
		}
		return Math.max(0, 1 - front * sum);
	}
	// Lentz's method on the continued fraction.
	let b = z + 1 - a;
	let c = 1e300;
	let d = 1 / b;
	let h = d;
	for (let k = 1; k < 1000; k++) {
		const an = -k * (k - a);
		b += 2;
		d = 1 / (an * d + b);
		c = b + an / c;
		const change = d * c;
		h *= change;
		if (Math.abs(change - 1) < 1e-16) break;
	}
	return front * h;
}
