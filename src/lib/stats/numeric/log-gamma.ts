const HALF_LOG_TWO_PI = 0.9189385332046728;

/** B_2k / (2k (2k − 1)), the coefficients of Stirling's series. */
const STIRLING = [
	1 / 12,
	-1 / 360,
	1 / 1260,
	-1 / 1680,
	1 / 1188,
	-691 / 360360,
	1 / 156,
	-3617 / 122400
];

/**
 * δ(x) in log Γ(x) = (x − 1/2) log x − x + log √(2π) + δ(x), for x > 0; about 1/(12x).
 *
 * Ratios of gamma functions written with δ keep their digits at large x, where the logarithms themselves
 * would cancel. The series is used from x = 15 on and reached from below by the recurrence of Γ.
 * Source: NIST Digital Library of Mathematical Functions, 5.11.1.
 */
export function stirlingRemainder(x: number): number {
	let below = 0;
	let at = x;
	while (at < 15) {
		below += (at + 0.5) * Math.log1p(1 / at) - 1;
		at++;
	}
	const square = 1 / (at * at);
	let series = 0;
	for (let k = STIRLING.length - 1; k >= 0; k--) series = series * square + STIRLING[k]!;
	return below + series / at;
}

/** log Γ(x) for x > 0; absolute error about 1e-15 × (1 + |log Γ(x)|). */
export function logGamma(x: number): number {
	return (x - 0.5) * Math.log(x) - x + HALF_LOG_TWO_PI + stirlingRemainder(x);
}

/**
 * x log(x / m) + m − x, the deviance half of a Poisson term, ≥ 0, with its digits when x is near m.
 *
 * Source: Loader (2000), Fast and Accurate Computation of Binomial Probabilities.
 */
export function halfDeviance(x: number, m: number): number {
	const apart = x - m;
	if (Math.abs(apart) < 0.1 * (x + m)) {
		const v = apart / (x + m);
		let term = 2 * x * v;
		let sum = apart * v;
		for (let j = 1; j < 200; j++) {
			term *= v * v;
			const next = sum + term / (2 * j + 1);
			if (next === sum) break;
			sum = next;
		}
		return sum;
	}
	return x * Math.log(x / m) + m - x;
}
