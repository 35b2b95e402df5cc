/**
 * Where the smooth monotone `f` is zero between `from` and `to`, of which one is on either side.
 *
 * Secant steps, kept inside the bracket by bisection; ends when a secant step is below `tolerance` (absolute),
 * which for a smooth function it is after some six evaluations. Use it where an evaluation is dear.
 * Source: Brent (1973), Algorithms for Minimization without Derivatives, chapter 4 (the safeguard).
 */
export function monotoneRoot(
	f: (x: number) => number,
	from: number,
	to: number,
	tolerance = 1e-12
): number {
	let [low, high] = [from, to];
	const fLow = f(low);
	const fHigh = f(high);
	if (fLow === 0) return low;
	if (fHigh === 0) return high;
	if (!(fLow > 0 !== fHigh > 0))
		throw new RangeError('monotoneRoot: the ends are on the same side of zero');
	let [before, fBefore] = Math.abs(fLow) < Math.abs(fHigh) ? [high, fHigh] : [low, fLow];
	let [x, fx] = Math.abs(fLow) < Math.abs(fHigh) ? [low, fLow] : [high, fHigh];
	for (let step = 0; step < 200; step++) {
		const middle = (low + high) / 2;
		let next = x - (fx * (x - before)) / (fx - fBefore);
		const inside = next >= Math.min(low, high) && next <= Math.max(low, high);
		// Every fourth step halves the bracket, should the secant creep.
		const bisects = !inside || step % 4 === 3;
		if (bisects && !(inside && Math.abs(next - x) <= tolerance)) next = middle;
		const done =
			Math.abs(next - x) <= tolerance || Math.abs(high - low) <= tolerance + 4e-16 * Math.abs(x);
		if (done) return next;
		[before, fBefore] = [x, fx];
		x = next;
		fx = f(x);
		if (fx === 0) return x;
		if (fx > 0 === fLow > 0) low = x;
		else high = x;
	}
	return x;
}
