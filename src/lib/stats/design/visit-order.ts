import type { Labels, Numbers } from './columns.js';
import { areNumbers, sortLabels } from './factor.js';

/**
 * The labels of the visits in order: by number when all are numbers, else by the mean of their times, then by label.
 *
 * Rows without a visit or a time take no part; a visit without any time comes last.
 */
export function visitOrder(visit: Labels, time: Numbers): string[] {
	const sorted = sortLabels(visit.labels);
	if (areNumbers(visit.labels)) return sorted;
	const sum = new Float64Array(visit.labels.length);
	const count = new Int32Array(visit.labels.length);
	for (let i = 0; i < visit.codes.length; i++) {
		const code = visit.codes[i]!;
		if (code < 0 || time.missing?.[i]) continue;
		sum[code]! += time.values[i]!;
		count[code]!++;
	}
	const mean = new Map(
		visit.labels.map((label, code) => [label, count[code] ? sum[code]! / count[code]! : Infinity])
	);
	// `sorted` is in the order of labels and sorting is stable, so equal means keep it.
	return sorted.sort((a, b) => {
		const [left, right] = [mean.get(a)!, mean.get(b)!];
		return left === right ? 0 : left - right;
	});
}
