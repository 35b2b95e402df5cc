/**
 * The x > 0 at which a tail area equals `tail`, for a distribution on the positive half-line (or that half of one).
 *
 * Give `above` or `below`, the area computed as itself, and the density. Newton's steps on log area against
 * log x; a bracket that shrinks at each step takes over when one would leave it. Relative error about 1e-15
 * times the condition of the quantile. Gives 0 or the largest number when the answer lies beyond them.
 */
export function quantileFromTails(problem: {
	above?: (x: number) => number;
	below?: (x: number) => number;
	density: (x: number) => number;
	tail: number;
	start: number;
}): number {
	const { tail, density } = problem;
	const area = (problem.above ?? problem.below)!;
	const sign = problem.above ? -1 : 1;
	if (!(tail > 0)) return problem.above ? Infinity : 0;
	const wanted = Math.log(tail);
	let low = -745;
	let high = 709;
	let at = Math.min(700, Math.max(-700, Math.log(problem.start > 0 ? problem.start : 1)));
	for (let step = 0; step < 400; step++) {
		const x = Math.exp(at);
		const found = area(x);
		const apart = found > 0 ? Math.log(found) - wanted : -Infinity;
		if (apart === 0) return x;
		if (apart > 0 === problem.above instanceof Function) low = at;
		else high = at;
		const slope = (sign * x * density(x)) / found;
		let next = at - apart / slope;
		const outside = !(next > low && next < high);
		if (outside) next = bracketed(low, high, at);
		if (Math.abs(next - at) <= 2e-16 * Math.max(1, Math.abs(at)) || !(high - low > 0))
			return Math.exp(next);
		at = next;
	}
	return Math.exp(at);
}

/** Where to go on when Newton's step leads out: the middle, but not further than a factor of e³ at once. */
function bracketed(low: number, high: number, at: number): number {
	const middle = (low + high) / 2;
	return Math.abs(middle - at) > 3 ? at + 3 * Math.sign(middle - at) : middle;
}
