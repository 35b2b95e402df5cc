import { lowestCommonCorrelation } from '../dependence/shape.js';
import { choleskyInPlace } from '../numeric/dense.js';
import type { PreparedModel } from './prepare-model.js';

/** Log of each class's standard deviation of the least-squares residual ÷ the first's, held within e^±2. */
function logDeviations(prepared: PreparedModel): number[] {
	const { design, layout, rows } = prepared;
	const squares = new Float64Array(layout.scaleClasses);
	const counts = new Float64Array(layout.scaleClasses);
	const byGroup = layout.dependence.errors.varianceBy === 'group';
	for (let s = 0; s + 1 < rows.subjectStart.length; s++)
		for (let i = rows.subjectStart[s]!; i < rows.subjectStart[s + 1]!; i++) {
			const k = byGroup ? design.subjectGroup[s]! : design.visit[i]!;
			const r = rows.a[i * rows.c + rows.c - 1]!;
			squares[k]! += r * r;
			counts[k]!++;
		}
	const log = (k: number) => Math.log((squares[k]! + 1e-300) / Math.max(1, counts[k]!)) / 2;
	return Array.from({ length: layout.scaleClasses - 1 }, (_, k) =>
		Math.min(2, Math.max(-2, log(k + 1) - log(0)))
	);
}

/** Entries of the unstructured factor from the pairs of residuals seen, drawn towards the diagonal until it is one. */
function pairwiseFactor(prepared: PreparedModel): number[] {
	const { design, layout, rows } = prepared;
	const k = layout.positions;
	const sums = new Float64Array(k * k);
	const counts = new Float64Array(k * k);
	for (let s = 0; s + 1 < rows.subjectStart.length; s++)
		for (let i = rows.subjectStart[s]!; i < rows.subjectStart[s + 1]!; i++)
			for (let j = rows.subjectStart[s]!; j <= i; j++) {
				const [a, b] = [design.visit[i]!, design.visit[j]!];
				const v = rows.a[i * rows.c + rows.c - 1]! * rows.a[j * rows.c + rows.c - 1]!;
				sums[a * k + b]! += v;
				counts[a * k + b]!++;
				if (i !== j) {
					sums[b * k + a]! += v;
					counts[b * k + a]!++;
				}
			}
	const mean = sums.map((v, i) => v / Math.max(1, counts[i]!));
	let total = 0;
	for (let i = 0; i < k; i++) total += mean[i * k + i]! / k;
	for (let keep = 0.95; ; keep *= 0.7) {
		const l = mean.map((v, i) => {
			const diagonal = Math.floor(i / k) === i % k;
			return diagonal ? Math.max(v, 0.05 * total) : v * keep;
		});
		if (choleskyInPlace(l, k) >= 0 && keep > 1e-3) continue;
		const entries: number[] = [];
		for (let i = 1; i < k; i++)
			for (let j = 0; j <= i; j++)
				entries.push(keep > 1e-3 ? l[i * k + j]! / l[0]! : i === j ? 1 : 0);
		return entries;
	}
}

/** Points from which the search may set out: one for each way the data might hang together. */
export function startingPoints(prepared: PreparedModel): Float64Array[] {
	const { layout } = prepared;
	const { dependence } = layout;
	const base = new Float64Array(layout.count);
	if (layout.scale >= 0) base.set(logDeviations(prepared), layout.scale);
	if (layout.shape >= 0) {
		if (dependence.errors.structure === 'unstructured')
			base.set(pairwiseFactor(prepared), layout.shape);
		else if (dependence.errors.structure === 'compound-symmetry') {
			const low = lowestCommonCorrelation(layout);
			const share = (0.3 - low) / (1 - low);
			base[layout.shape] = Math.log(share / (1 - share));
		} else base[layout.shape] = 0.4;
	}
	if (layout.visit >= 0) base[layout.visit] = 0.4;
	const levels = layout.range >= 0 ? [0.5, 1.5] : [0.7];
	const ranges = dependence.errors.along === 'visit' ? [-0.6, 0.2, 1, 2] : [-0.7, 0.8, 2.5, 4];
	const shares = [0.3, 0.9];
	let points = [base];
	const vary = (at: number, values: number[]) => {
		if (at < 0) return;
		points = points.flatMap((point) =>
			values.map((v) => {
				const next = point.slice();
				next[at] = v;
				return next;
			})
		);
	};
	if (layout.q > 0) {
		vary(layout.subject, levels);
		const last =
			layout.subject + (dependence.subjectEffects === 'level-and-slope' ? 2 : layout.q - 1);
		if (layout.q === 2) vary(last, [0.4]);
	}
	vary(layout.range, ranges);
	vary(layout.share, shares);
	// Variances that differ have valleys of their own beside serial errors: also start from equal ones.
	if (layout.range >= 0 && layout.scale >= 0)
		points = points.flatMap((point) => {
			const equal = point.slice();
			equal.fill(0, layout.scale, layout.scale + layout.scaleClasses - 1);
			return [point, equal];
		});
	return points;
}
