import { Matrix } from 'ml-matrix';
import { StatsError } from '../errors.js';
import { factorise, form } from '../numeric/symmetric.js';
import type { MeanDesign, Question, SubjectVariances, VisitDesign } from './types.js';

/**
 * V⁻¹ = I/σ² − Z K Z'/σ⁴ with K = (I + G Z'Z/σ²)⁻¹ G, for V = Z G Z' + σ² I and Z = [1, t]: a 2 × 2 problem
 * whatever the number of visits, also when G is singular. The three entries of the symmetric K.
 *
 * Source: Woodbury's identity; Laird & Ware (1982), Biometrics 38:963-974.
 */
function shrinkage(times: readonly number[], v: SubjectVariances): [number, number, number] {
	let [n, s, q] = [0, 0, 0];
	for (const t of times) {
		n++;
		s += t;
		q += t * t;
	}
	const [g00, g01, g11] = [v.level, v.levelSlopeCovariance, v.slope];
	const a = 1 + (g00 * n + g01 * s) / v.residual;
	const b = (g00 * s + g01 * q) / v.residual;
	const c = (g01 * n + g11 * s) / v.residual;
	const d = 1 + (g01 * s + g11 * q) / v.residual;
	const determinant = a * d - b * c;
	return [
		(d * g00 - b * g01) / determinant,
		(d * g01 - b * g11) / determinant,
		(a * g11 - c * g01) / determinant
	];
}

/** Row of the mean for an arm and visit: common part, then what arm 1 adds. */
function meanRow(design: VisitDesign, arm: 0 | 1, visit: number): number[] {
	const { times, mean, commonBaseline } = design;
	const common =
		mean === 'linear' ? [1, times[visit]!] : times.map((_, j) => (j === visit ? 1 : 0));
	const added = common.map((x) => x * arm);
	return [...common, ...(commonBaseline ? added.slice(1) : added)];
}

/** X'V⁻¹X of one subject of an arm, averaged over when subjects of that arm leave (p × p). */
function informationOfSubject(design: VisitDesign, arm: 0 | 1): Matrix {
	const { times, variances } = design;
	const gone = design.dropout[arm];
	const p = meanRow(design, arm, 0).length;
	const total = Matrix.zeros(p, p);
	for (let seen = 1; seen <= times.length; seen++) {
		const share = (gone[seen] ?? 1) - gone[seen - 1]!;
		if (!(share > 0)) continue;
		const here = times.slice(0, seen);
		const [k00, k01, k11] = shrinkage(here, variances);
		const zx0 = new Array<number>(p).fill(0);
		const zx1 = new Array<number>(p).fill(0);
		here.forEach((t, visit) => {
			const row = meanRow(design, arm, visit);
			row.forEach((x, i) => {
				zx0[i]! += x;
				zx1[i]! += x * t;
				if (x === 0) return;
				row.forEach((y, j) =>
					total.set(i, j, total.get(i, j) + (share * x * y) / variances.residual)
				);
			});
		});
		const scale = share / variances.residual ** 2;
		for (let i = 0; i < p; i++)
			for (let j = 0; j < p; j++) {
				const taken =
					k00 * zx0[i]! * zx0[j]! +
					k01 * (zx0[i]! * zx1[j]! + zx1[i]! * zx0[j]!) +
					k11 * zx1[i]! * zx1[j]!;
				total.set(i, j, total.get(i, j) - scale * taken);
			}
	}
	return total;
}

/** Weights of the question on the coefficients of the mean. */
function weightsOf(question: Exclude<Question, { question: 'mean-difference' }>): number[] {
	const { times, commonBaseline } = question;
	const added =
		question.mean === 'linear'
			? question.question === 'slope-difference'
				? [0, 1]
				: [1, question.time]
			: times.map((t) =>
					question.question === 'difference-at-visit' && t === question.time ? 1 : 0
				);
	const columns = question.mean === 'linear' ? 2 : times.length;
	return [...new Array<number>(columns).fill(0), ...(commonBaseline ? added.slice(1) : added)];
}

/**
 * Variance of the estimated difference with `subjects` in [arm 0, arm 1] at the start, variances known.
 *
 * For visits: the generalised least squares variance, c'(n₀M₀ + n₁M₁)⁻¹c, M the mean information of one subject of
 * an arm over the patterns of dropout (taken as they are expected). Without dropout and common baseline a slope
 * difference has σ²/Σ(t − t̄)² + τ²_slope per subject (Fitzmaurice, Laird & Ware 2011, chapter 20; Diggle, Heagerty,
 * Liang & Zeger 2002, section 2.4). Subject numbers need not be whole.
 * For means: σ² (1/n₀ + 1/n₁) × what `meanVarianceFactor` says.
 * @throws StatsError `rank-deficient` when the visits cannot tell the difference
 */
export function varianceOfDifference(
	question: Question,
	subjects: readonly [number, number]
): number {
	if (question.question === 'mean-difference')
		return (
			question.totalVariance * meanVarianceFactor(question) * (1 / subjects[0] + 1 / subjects[1])
		);
	const information = Matrix.add(
		Matrix.mul(informationOfSubject(question, 0), subjects[0]),
		Matrix.mul(informationOfSubject(question, 1), subjects[1])
	);
	const factored = factorise(information);
	if (!factored)
		throw new StatsError(
			'rank-deficient',
			`The visits at ${question.times.join(', ')} cannot tell this difference: too few of them are seen.`
		);
	return form(weightsOf(question), factored.inverse);
}

/**
 * Variance of a subject's summary relative to one outcome's, n visits, p before, correlation ρ of any two:
 * follow-up (1 + (n − 1)ρ)/n; change the same + (1 + (p − 1)ρ)/p − 2ρ; adjusted the same − pρ²/(1 + (p − 1)ρ).
 *
 * Source: Frison & Pocock (1992), Statistics in Medicine 11:1685-1704.
 */
export function meanVarianceFactor(design: MeanDesign): number {
	const { visits: n, baselineVisits: p, icc, analysis } = design;
	const after = (1 + (n - 1) * icc) / n;
	if (analysis === 'follow-up') return after;
	if (analysis === 'change') return after + (1 + (p - 1) * icc) / p - 2 * icc;
	return after - (p * icc * icc) / (1 + (p - 1) * icc);
}
