const GOLDEN = (3 - Math.sqrt(5)) / 2;

export interface Minimum {
	x: number;
	value: number;
	evaluations: number;
}

/**
 * The lowest point of `f` between `from` and `to`, where f has one valley.
 *
 * Parabolic steps, golden section when they misbehave; x is found to about `tolerance`, absolute.
 * Source: Brent (1973), Algorithms for Minimization without Derivatives, chapter 5.
 */
export function minimise(
	f: (x: number) => number,
	from: number,
	to: number,
	tolerance = 1e-9
): Minimum {
	let low = from;
	let high = to;
	let best = low + GOLDEN * (high - low);
	let second = best;
	let third = best;
	let fBest = f(best);
	let fSecond = fBest;
	let fThird = fBest;
	let step = 0;
	let before = 0;
	let evaluations = 1;
	for (; evaluations < 200; evaluations++) {
		const middle = (low + high) / 2;
		const close = tolerance + 1e-11 * Math.abs(best);
		if (Math.abs(best - middle) <= 2 * close - (high - low) / 2) break;
		let golden = true;
		if (Math.abs(before) > close) {
			const r = (best - second) * (fBest - fThird);
			let q = (best - third) * (fBest - fSecond);
			let p = (best - third) * q - (best - second) * r;
			q = 2 * (q - r);
			if (q > 0) p = -p;
			q = Math.abs(q);
			if (
				Math.abs(p) < Math.abs((q * before) / 2) &&
				p > q * (low - best) &&
				p < q * (high - best)
			) {
				before = step;
				step = p / q;
				const there = best + step;
				if (there - low < 2 * close || high - there < 2 * close) {
					step = best < middle ? close : -close;
				}
				golden = false;
			}
		}
		if (golden) {
			before = best < middle ? high - best : low - best;
			step = GOLDEN * before;
		}
		const x = best + (Math.abs(step) >= close ? step : step > 0 ? close : -close);
		const fx = f(x);
		if (fx <= fBest) {
			if (x < best) high = best;
			else low = best;
			[third, second, best] = [second, best, x];
			[fThird, fSecond, fBest] = [fSecond, fBest, fx];
		} else {
			if (x < best) low = x;
			else high = x;
			if (fx <= fSecond || second === best) {
				[third, second] = [second, x];
				[fThird, fSecond] = [fSecond, fx];
			} else if (fx <= fThird || third === best || third === second) {
				third = x;
				fThird = fx;
			}
		}
	}
	return { x: best, value: fBest, evaluations };
}

/**
 * Where `f` changes sign between `from` and `to`, of which one is on either side of zero.
 *
 * Interpolates between the ends and bisects when that is slow (the Illinois form of false position, with a
 * bisection every third step); x to about `tolerance`, relative to |x| + 1.
 * Source: Dowell & Jarratt (1971), BIT 11:168-174.
 */
export function findRoot(
	f: (x: number) => number,
	from: number,
	to: number,
	tolerance = 1e-11
): number {
	let a = from;
	let b = to;
	let fa = f(a);
	let fb = f(b);
	if (fa === 0) return a;
	if (fb === 0) return b;
	if (fa > 0 === fb > 0) throw new RangeError('findRoot: the ends are on the same side of zero');
	for (let step = 0; step < 200 && Math.abs(b - a) > tolerance * (Math.abs(b) + 1); step++) {
		const x = step % 3 === 2 ? (a + b) / 2 : b - (fb * (b - a)) / (fb - fa);
		const fx = f(x);
		if (fx === 0) return x;
		if (fx > 0 === fb > 0) {
			fa /= 2;
		} else {
			a = b;
			fa = fb;
		}
		b = x;
		fb = fx;
	}
	return b;
}
