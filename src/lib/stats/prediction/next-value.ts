import type { Analysis } from '../analysis/analyse.js';
import type { BuiltDesign } from '../design/build-model-design.js';
import { meanRow, type CovariateWeights } from '../design/mean-rows.js';
import { levelPosition } from '../design/mean-terms.js';
import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { choleskyInPlace, solveLower } from '../numeric/dense.js';
import { normalUpperQuantile } from '../numeric/distribution.js';
import type { AnalysisPlan } from '../plan.js';

/** An occasion of a subject: past, with its outcome, or to come. */
export interface SubjectOccasion {
	time: number;
	/** Label of the visit; needed when mean or errors go by visit. */
	visit?: string | null;
	/** By name, as the plan has them; `baseline` on the outcome's own scale. */
	covariates?: Readonly<Record<string, number | string>>;
}

export interface SubjectHistory {
	/** Null when the model has no group. */
	group: string | null;
	/** Outcomes on the outcome's own scale, in any order; may be empty. */
	past: readonly (SubjectOccasion & { outcome: number })[];
}

/** What a subject's next outcome is expected to be; on the outcome's own scale. */
export interface NextValue {
	/** Mean, or median on a log scale. */
	estimate: number;
	lower: number;
	upper: number;
	/** Of the outcome about the estimate, on the analysed scale. */
	standardDeviation: number;
}

const bad = (sentence: string, facts: Record<string, string | number> = {}): StatsError =>
	new StatsError('bad-option', sentence, facts);

function analysed(value: number, scale: string, what: string): number {
	if (!Number.isFinite(value))
		throw new StatsError('not-finite', `The ${what} is ${value}; it must be finite.`);
	if (scale === 'identity') return value;
	if (value > 0) return Math.log(value);
	throw new StatsError(
		'not-positive',
		`The ${what} is ${value}; on a log scale it must be above zero.`,
		{ value }
	);
}

/** The covariate columns of one occasion. Errors: `bad-option`, `unknown-level`, `wrong-kind`. */
function covariatesOf(
	built: BuiltDesign,
	occasion: SubjectOccasion,
	scale: string
): CovariateWeights {
	return (term) => {
		if (term.kind !== 'numeric' && term.kind !== 'category') return 0;
		const { name, kind, levels } = built.parts.covariates[term.covariate]!;
		const value = occasion.covariates?.[name];
		if (value === undefined)
			throw bad(`The value of “${name}” is needed at time ${occasion.time}.`, { covariate: name });
		if (term.kind === 'category') {
			const level = levelPosition(levels, String(value), `level of “${name}”`);
			return level === term.level ? 1 : 0;
		}
		if (typeof value !== 'number')
			throw new StatsError(
				'wrong-kind',
				`The value of “${name}” is “${value}”; it must be a number.`
			);
		return analysed(value, kind === 'baseline' ? scale : 'identity', `value of “${name}”`);
	};
}

/** Whether mean or errors differ by visit, so that each visit must be one the model knows. */
function goesByVisit({ design }: BuiltDesign, { errors }: AnalysisPlan): boolean {
	if (design.visits.length === 0) return false;
	const matrix = errors.structure === 'toeplitz' || errors.structure === 'unstructured';
	const serial = errors.structure === 'serial' || errors.structure === 'serial-with-noise';
	return (
		design.timeInMean === 'categorical' ||
		matrix ||
		errors.varianceBy === 'visit' ||
		(serial && errors.along === 'visit')
	);
}

/**
 * Positions of the visits. Where they only share an effect, one that is new to the model, or has no name, stands for itself.
 * Errors: `bad-option`, `unknown-level`.
 */
function visitsOf(
	built: BuiltDesign,
	plan: AnalysisPlan,
	occasions: readonly SubjectOccasion[]
): Int32Array {
	const known = [...built.design.visits];
	const strict = goesByVisit(built, plan);
	return Int32Array.from(occasions, ({ visit, time }, i) => {
		if (!strict) {
			const label = visit ?? `\0${i}`;
			if (!known.includes(label)) known.push(label);
			return known.indexOf(label);
		}
		if (visit === undefined || visit === null)
			throw bad(`The visit at time ${time} is needed: the model goes by visit.`, { time });
		return levelPosition(built.design.visits, visit, 'visit');
	});
}

/** Covariance of the outcomes of one subject at these occasions, m × m; visit effects as far as they are shared by them. */
function covarianceOf(
	{ natural, scale, prepared }: ModelFit,
	time: Float64Array,
	visit: Int32Array,
	group: number
): Float64Array {
	const m = time.length;
	const position = prepared.layout.positionsAreVisits ? visit : visit.map((_, i) => i);
	const v = natural.covariance({ time, position, visit, group });
	for (let i = 0; i < m; i++)
		for (let j = 0; j < m; j++) {
			const shared = visit[i] === visit[j] ? natural.visitRatio : 0;
			v[i * m + j] = scale * (v[i * m + j]! + shared);
		}
	return v;
}

/**
 * The interval in which a subject's next outcome is expected, from the subject's own history and the fitted model.
 *
 * With y the past outcomes, V their covariance, c that with the next one and w = V⁻¹c, the estimate is
 * x₀'β + w'(y − Xβ) and its variance v₀₀ − w'c + d'Cov(β)d with d = x₀ − X'w: what the past leaves open, and what the
 * coefficients do. The covariance of the outcomes is taken as known, so that with few subjects the interval is somewhat too
 * narrow. Other subjects' outcomes at the same visit are not used: a visit effect counts as not yet known.
 * The subject need not be among those fitted. Errors: `bad-option`, `unknown-level`, `wrong-kind`, `not-finite`,
 * `not-positive`, `repeated-occasion`, `out-of-range`.
 * Source: best linear unbiased prediction, Goldberger (1962), JASA 57:369-375; Robinson (1991), Statistical Science
 * 6:15-51.
 */
export function nextValue(
	{ built, fit, result: { plan } }: Pick<Analysis, 'built' | 'fit' | 'result'>,
	{ group, past }: SubjectHistory,
	next: SubjectOccasion,
	confidence = 0.95
): NextValue {
	if (!(confidence > 0 && confidence < 1))
		throw bad(`The confidence is ${confidence}; it must lie between 0 and 1.`);
	const occasions = [...past, next];
	const odd = occasions.find(({ time }) => !Number.isFinite(time));
	if (odd) throw new StatsError('not-finite', `The time ${odd.time} is not finite.`);
	if (group === null && built.parts.groups.length > 0)
		throw bad('The group of the subject is needed: the model was fitted with groups.');
	const level =
		built.parts.groups.length === 0 ? 0 : levelPosition(built.parts.groups, group!, 'group');
	const m = past.length;
	const time = Float64Array.from(occasions, (o) => o.time);
	const visit = visitsOf(built, plan, occasions);
	const rows = occasions.map((o, i) => {
		const { inside } = meanRow(
			built,
			{ time: o.time, visit: visit[i]! },
			level,
			covariatesOf(built, o, plan.scale)
		);
		return built.columns.kept.map((j) => inside[j]!);
	});
	const mean = (row: readonly number[]) => row.reduce((sum, x, j) => sum + x * fit.beta[j]!, 0);
	const v = covarianceOf(fit, time, visit, level);

	// L⁻¹ of the past on [c, y − Xβ, X]: every product below is one of its columns with another.
	const factor = new Float64Array(m * m);
	for (let i = 0; i < m; i++) for (let j = 0; j < m; j++) factor[i * m + j] = v[i * (m + 1) + j]!;
	if (m > 0 && choleskyInPlace(factor, m) >= 0) {
		throw new StatsError(
			'repeated-occasion',
			'Two of the past occasions are one and the same to this model, so nothing can be predicted from both.'
		);
	}
	const p = fit.beta.length;
	const width = p + 2;
	const solved = new Float64Array(m * width);
	past.forEach(({ outcome }, i) => {
		solved[i * width] = v[i * (m + 1) + m]!;
		solved[i * width + 1] = analysed(outcome, plan.scale, 'outcome') - mean(rows[i]!);
		rows[i]!.forEach((x, j) => (solved[i * width + 2 + j] = x));
	});
	solveLower(factor, m, solved, width);
	const withC = (column: number) => {
		let sum = 0;
		for (let i = 0; i < m; i++) sum += solved[i * width]! * solved[i * width + column]!;
		return sum;
	};
	const own = rows[m]!;
	const centre = mean(own) + withC(1);
	const d = own.map((x, j) => x - withC(2 + j));
	const open = v[m * (m + 1) + m]! - withC(0);
	let variance = Math.max(0, open);
	for (let i = 0; i < p; i++)
		for (let j = 0; j < p; j++) variance += d[i]! * fit.vcov[i]![j]! * d[j]!;
	const standardDeviation = Math.sqrt(variance);
	const reach = normalUpperQuantile((1 - confidence) / 2) * standardDeviation;
	const back = plan.scale === 'log' ? Math.exp : (value: number) => value;
	const value: NextValue = {
		estimate: back(centre),
		lower: back(centre - reach),
		upper: back(centre + reach),
		standardDeviation
	};
	if (!Object.values(value).every(Number.isFinite))
		throw new StatsError('out-of-range', 'The prediction is too large to be held.');
	return value;
}
