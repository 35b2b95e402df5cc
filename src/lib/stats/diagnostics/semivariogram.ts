import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { marginalResidualsOf, subjectSystems } from '../prediction/inverse-covariance.js';

/** Pairs of rows of one subject whose times are about equally far apart. */
export interface SemivariogramBin {
	/** Mean distance in time; time unit. */
	lag: number;
	pairs: number;
	/** Mean of half the squared difference of their marginal residuals; outcome unit squared. */
	observed: number;
	/** What the fitted model expects of it, at the same pairs. */
	model: number;
}

export interface Semivariogram {
	/** By rising lag. */
	within: SemivariogramBin[];
	/** The same over all pairs of rows of different subjects: the whole variance; null with one subject. */
	between: { pairs: number; observed: number; model: number } | null;
	/** How many subjects were left out of `within` because pairs of all would take too long. */
	subjectsLeftOut: number;
}

/** More pairs than this and later subjects are left out. */
const MOST_PAIRS = 5e6;

/**
 * How unlike two residuals are by how far apart in time they were taken, within subjects; and between subjects.
 *
 * A level that a subject keeps shows as the gap between where `within` levels off and `between`; errors that fade as a
 * rising curve; noise as where it starts. Lags are put together in `bins` of equal width, or by exact lag when there are no
 * more of them than `bins` (12 unless said otherwise). Residuals are y − Xβ, somewhat less spread than errors.
 * Errors: `bad-option`, `singular-information`.
 * Source: Diggle, Heagerty, Liang & Zeger (2002), Analysis of Longitudinal Data, sections 3.4 and 5.2.
 */
export function semivariogram(fit: ModelFit, bins = 12): Semivariogram {
	if (!Number.isInteger(bins) || bins < 1)
		throw new StatsError('bad-option', `The lags cannot be put together in ${bins} bins.`);
	const { design } = fit.prepared;
	const residual = marginalResidualsOf(fit);
	const shared = fit.natural.visitRatio * fit.scale;
	const system = subjectSystems(fit);
	const lags: number[] = [];
	const observed: number[] = [];
	const model: number[] = [];
	const variances = new Float64Array(design.n);
	let subjectsLeftOut = 0;
	for (let s = 0; s < design.subjects.length; s++) {
		const { from, n, covariance } = system(s);
		for (let i = 0; i < n; i++) variances[from + i] = covariance[i * n + i]!;
		if (lags.length + (n * (n - 1)) / 2 > MOST_PAIRS) {
			if (n > 1) subjectsLeftOut++;
			continue;
		}
		for (let i = 0; i < n; i++)
			for (let j = 0; j < i; j++) {
				lags.push(Math.abs(design.time[from + i]! - design.time[from + j]!));
				observed.push((residual[from + i]! - residual[from + j]!) ** 2 / 2);
				const apart = design.visit[from + i] === design.visit[from + j] ? 0 : shared;
				model.push(
					(covariance[i * n + i]! + covariance[j * n + j]!) / 2 - covariance[i * n + j]! + apart
				);
			}
	}
	const within = binned(lags, bins).map((pairs): SemivariogramBin => {
		const mean = (values: readonly number[]) =>
			pairs.reduce((sum, at) => sum + values[at]!, 0) / pairs.length;
		return {
			lag: mean(lags),
			pairs: pairs.length,
			observed: mean(observed),
			model: mean(model)
		};
	});
	return { within, between: betweenSubjects(fit, residual, variances), subjectsLeftOut };
}

/** Positions of the pairs of each bin that has any. */
function binned(lags: readonly number[], bins: number): number[][] {
	if (lags.length === 0) return [];
	const exact = new Set<number>();
	let longest = 0;
	for (const lag of lags) {
		if (exact.size <= bins) exact.add(lag);
		longest = Math.max(longest, lag);
	}
	const sorted = [...exact].sort((a, b) => a - b);
	const place = new Map(sorted.map((lag, i) => [lag, i]));
	const few = exact.size <= bins;
	const groups: number[][] = Array.from({ length: few ? sorted.length : bins }, () => []);
	lags.forEach((lag, at) =>
		groups[few ? place.get(lag)! : Math.min(bins - 1, Math.floor((lag / longest) * bins))]!.push(at)
	);
	return groups.filter((g) => g.length > 0);
}

/** By sums over all pairs less those within subjects: the cost is one pass over the rows. */
function betweenSubjects(
	fit: ModelFit,
	residual: Float64Array,
	variances: Float64Array
): Semivariogram['between'] {
	const { design } = fit.prepared;
	const { n } = design;
	const visits = Math.max(1, design.visits.length);
	const shared = fit.natural.visitRatio * fit.scale;
	// Σ over pairs of rows of different subjects of ½(r_i − r_j)² = ½ Σ_i r_i²(n − n_s) − ½((Σr)² − Σ_s(Σ_s r)²).
	let pairs = 0;
	let squares = 0;
	let whole = 0;
	let own = 0;
	let variance = 0;
	let together = 0;
	const byVisit = new Float64Array(visits);
	for (let s = 0; s < design.subjects.length; s++) {
		const [from, to] = [design.subjectStart[s]!, design.subjectStart[s + 1]!];
		const others = n - (to - from);
		let sum = 0;
		const mine = new Map<number, number>();
		for (let i = from; i < to; i++) {
			squares += residual[i]! ** 2 * others;
			variance += variances[i]! * others;
			sum += residual[i]!;
			mine.set(design.visit[i]!, (mine.get(design.visit[i]!) ?? 0) + 1);
		}
		for (const [v, count] of mine) {
			byVisit[v]! += count;
			together -= count * count;
		}
		whole += sum;
		own += sum * sum;
		pairs += (others * (to - from)) / 2;
	}
	if (pairs === 0) return null;
	for (const count of byVisit) together += count * count;
	return {
		pairs,
		observed: (squares - (whole * whole - own)) / 2 / pairs,
		model: variance / 2 / pairs + (shared * (pairs - together / 2)) / pairs
	};
}
