// Times something many times over and prints what came of it. Nothing is judged.

/** @param {number[]} times @param {number} share */
const quantile = (times, share) => {
	const sorted = [...times].sort((a, b) => a - b);
	return sorted[Math.min(sorted.length - 1, Math.ceil(share * sorted.length) - 1)] ?? NaN;
};
const shown = (/** @type {number} */ ms) =>
	ms >= 1000 ? `${(ms / 1000).toFixed(2)} s` : `${ms.toFixed(ms < 10 ? 2 : 1)} ms`;

/**
 * @param {string} what
 * @param {number[]} times in milliseconds
 */
export function tell(what, times) {
	console.log(
		`${what.padEnd(58)} median ${shown(quantile(times, 0.5)).padStart(9)}   p95 ${shown(quantile(times, 0.95)).padStart(9)}   (${times.length} times)`
	);
}

/**
 * One after the other, or so many at once.
 * @param {string} what
 * @param {number} count
 * @param {(n: number) => Promise<unknown>} work
 * @param {{ atOnce?: number, first?: number }} [options] first: how many go before and are not counted
 */
export async function measure(what, count, work, { atOnce = 1, first = 3 } = {}) {
	for (let n = 0; n < first; n++) await work(n);
	/** @type {number[]} */
	const times = [];
	let next = first;
	await Promise.all(
		Array.from({ length: atOnce }, async () => {
			while (next < first + count) {
				const begun = performance.now();
				await work(next++);
				times.push(performance.now() - begun);
			}
		})
	);
	tell(what, times);
}
