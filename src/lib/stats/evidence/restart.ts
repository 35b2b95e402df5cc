import { objective } from '../fit/objective-of.js';
import type { PreparedModel } from '../fit/prepare-model.js';
import { invertPositive } from '../numeric/dense.js';
import type { FitMethod } from '../plan.js';

/**
 * Where refits to data like these set out: the estimates, with a component that stands at its edge moved inside, since
 * the slope is zero there and a search would never leave it.
 */
export function startOf(
	{ layout, dependence }: PreparedModel,
	working: ArrayLike<number>,
	boundary: readonly string[]
): Float64Array {
	const x = Float64Array.from(working);
	const last = layout.subject + (dependence.subjectEffects === 'level-and-slope' ? 2 : 1);
	for (const edge of boundary) {
		if (edge === 'subject level') x[layout.subject] = 0.3;
		if (edge === 'subject slope' || edge === 'level–slope correlation') x[last] = 0.2;
		if (edge === 'visit') x[layout.visit] = 0.2;
		if (edge === 'noise') x[layout.share] = 0.4;
		if (edge === 'serial') x[layout.share] = 1.1;
		if (edge === 'range' || edge === 'serial')
			x[layout.range] =
				dependence.errors.along === 'visit'
					? 0.3
					: Math.log(layout.smallestGap / layout.gapUnit / 1.5);
		if (edge === 'range without end')
			x[layout.range] = Math.log((2 * layout.longestSpan) / layout.gapUnit);
	}
	return x;
}

/** Inverse of the second derivatives of −2 log-likelihood at `x`, by central differences of its slope; or null. */
export function inverseAt(
	prepared: PreparedModel,
	method: FitMethod,
	x: Float64Array
): Float64Array | null {
	const k = x.length;
	const f = objective(prepared, method);
	const bend = new Float64Array(k * k);
	const step = 1e-4;
	for (let i = 0; i < k; i++) {
		const [before, after] = [-step, step].map((by) => {
			const at = x.slice();
			at[i]! += by;
			return f(at);
		});
		if (!before || !after) return null;
		for (let j = 0; j < k; j++) bend[i * k + j] = (after.slope[j]! - before.slope[j]!) / (2 * step);
	}
	for (let i = 0; i < k; i++)
		for (let j = 0; j < i; j++)
			bend[i * k + j] = bend[j * k + i] = (bend[i * k + j]! + bend[j * k + i]!) / 2;
	const found = invertPositive(bend, k);
	return found && found.inverse.every(Number.isFinite) ? found.inverse : null;
}
