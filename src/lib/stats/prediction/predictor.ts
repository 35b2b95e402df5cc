import type { Analysis } from '../analysis/analyse.js';
import type { Layout } from '../dependence/layout.js';
import { naturalModel, type NaturalModel } from '../dependence/natural.js';
import { levelPosition, type MeanCovariate, type MeanTerm } from '../design/mean-terms.js';
import { timeFunctions } from '../design/time-basis.js';
import { ENGINE_VERSION } from '../engine.js';
import { StatsError } from '../errors.js';
import { choleskyInPlace, solveLower } from '../numeric/dense.js';
import { normalUpperQuantile } from '../numeric/distribution.js';
import type { AnalysisPlan, TimeInMean } from '../plan.js';
import {
	analysed,
	bad,
	covariateWeights,
	type NextValue,
	type SubjectHistory,
	type SubjectOccasion
} from './occasion.js';

/** A fitted model as far as a subject's next value goes: numbers and names only, for JSON and for devices without the data. */
export interface Predictor {
	engine: string;
	scale: 'identity' | 'log';
	groups: string[];
	visits: string[];
	/** Whether mean or errors differ by visit, so that each occasion must name one of `visits`. */
	byVisit: boolean;
	mean: {
		time: TimeInMean;
		commonBaseline: boolean;
		/** First and last time of the data, by which powers of time are centred and scaled. */
		timeRange: [number, number];
		terms: MeanTerm[];
		covariates: MeanCovariate[];
		/** One for each term, powers of time centred and scaled. */
		coefficients: number[];
		/** Of the coefficients. */
		covariance: number[][];
	};
	/** What `naturalModel` makes the covariance of outcomes from. */
	dependence: { layout: Layout; working: number[]; scale: number };
}

function goesByVisit(visits: number, time: TimeInMean, { errors }: AnalysisPlan): boolean {
	if (visits === 0) return false;
	const matrix = errors.structure === 'toeplitz' || errors.structure === 'unstructured';
	const serial = errors.structure === 'serial' || errors.structure === 'serial-with-noise';
	return (
		time === 'categorical' ||
		matrix ||
		errors.varianceBy === 'visit' ||
		(serial && errors.along === 'visit')
	);
}

/**
 * A fitted model in coefficients, as plain JSON of a few kilobytes, holding nothing of any subject.
 *
 * `predictNext` gives from it, to the bit, what `nextValue` gives from the analysis.
 */
export function predictor({
	built,
	fit,
	result: { plan }
}: Pick<Analysis, 'built' | 'fit' | 'result'>): Predictor {
	const { design, columns, parts } = built;
	const { layout } = fit.prepared;
	let from = Infinity;
	let to = -Infinity;
	for (const t of design.time) {
		from = Math.min(from, t);
		to = Math.max(to, t);
	}
	return {
		engine: ENGINE_VERSION,
		scale: plan.scale,
		groups: [...parts.groups],
		visits: [...design.visits],
		byVisit: goesByVisit(design.visits.length, design.timeInMean, plan),
		mean: {
			time: design.timeInMean,
			commonBaseline: !parts.groupAtStart,
			timeRange: [from, to],
			terms: columns.kept.map((j) => columns.terms[j]!),
			covariates: parts.covariates,
			coefficients: fit.beta,
			covariance: fit.vcov
		},
		dependence: { layout, working: [...fit.working], scale: fit.scale }
	};
}

/** The columns of the mean at an occasion. */
function meanRows({ mean, visits }: Predictor) {
	const range = Float64Array.from(mean.timeRange);
	const common = timeFunctions(mean.time, range, visits, false);
	const byGroup = timeFunctions(mean.time, range, visits, mean.commonBaseline);
	return (
		time: number,
		visit: number,
		group: number,
		covariates: (term: MeanTerm) => number
	): number[] =>
		mean.terms.map((term) => {
			switch (term.kind) {
				case 'intercept':
					return 1;
				case 'time':
					return common[term.index]!.at(time, visit);
				case 'group':
					return term.level === group ? 1 : 0;
				case 'time-by-group':
					return term.level === group ? byGroup[term.index]!.at(time, visit) : 0;
				default:
					return covariates(term);
			}
		});
}

/**
 * Positions of the visits. Where they only share an effect, one that is new to the model, or has no name, stands for itself.
 * Errors: `bad-option`, `unknown-level`.
 */
function visitsOf(
	{ visits, byVisit }: Predictor,
	occasions: readonly SubjectOccasion[]
): Int32Array {
	const known = [...visits];
	return Int32Array.from(occasions, ({ visit, time }, i) => {
		if (!byVisit) {
			const label = visit ?? `\0${i}`;
			if (!known.includes(label)) known.push(label);
			return known.indexOf(label);
		}
		if (visit === undefined || visit === null)
			throw bad(`The visit at time ${time} is needed: the model goes by visit.`, { time });
		return levelPosition(visits, visit, 'visit');
	});
}

/** Covariance of the outcomes of one subject at these occasions, m × m; visit effects as far as they are shared by them. */
function covarianceOf(
	natural: NaturalModel,
	{ layout, scale }: Predictor['dependence'],
	time: Float64Array,
	visit: Int32Array,
	group: number
): Float64Array {
	const m = time.length;
	const position = layout.positionsAreVisits ? visit : visit.map((_, i) => i);
	const v = natural.covariance({ time, position, visit, group });
	for (let i = 0; i < m; i++)
		for (let j = 0; j < m; j++) {
			const shared = visit[i] === visit[j] ? natural.visitRatio : 0;
			v[i * m + j] = scale * (v[i * m + j]! + shared);
		}
	return v;
}

/**
 * The interval in which a subject's next outcome is expected, from the subject's own history and a model's coefficients.
 *
 * With y the past outcomes, V their covariance, c that with the next one and w = V⁻¹c, the estimate is
 * x₀'β + w'(y − Xβ) and its variance v₀₀ − w'c + d'Cov(β)d with d = x₀ − X'w: what the past leaves open, and what the
 * coefficients do. The covariance of the outcomes is taken as known, so that with few subjects the interval is somewhat too
 * narrow. Other subjects' outcomes at the same visit are not used: a visit effect counts as not yet known.
 * The subject need not be among those fitted, and may have no past. Errors: `bad-option`, `unknown-level`, `wrong-kind`,
 * `not-finite`, `not-positive`, `repeated-occasion`, `out-of-range`.
 * Source: best linear unbiased prediction, Goldberger (1962), JASA 57:369-375; Robinson (1991), Statistical Science
 * 6:15-51.
 */
export function predictNext(
	model: Predictor,
	{ group, past }: SubjectHistory,
	next: SubjectOccasion,
	confidence = 0.95
): NextValue {
	if (!(confidence > 0 && confidence < 1))
		throw bad(`The confidence is ${confidence}; it must lie between 0 and 1.`);
	if (model.engine !== ENGINE_VERSION)
		throw bad(
			`The coefficients were made by ${model.engine} and this is ${ENGINE_VERSION}; make them anew.`
		);
	const occasions = [...past, next];
	const odd = occasions.find(({ time }) => !Number.isFinite(time));
	if (odd) throw new StatsError('not-finite', `The time ${odd.time} is not finite.`);
	const { groups, visits, mean: spec, dependence } = model;
	if (group === null && groups.length > 0)
		throw bad('The group of the subject is needed: the model was fitted with groups.');
	const level = groups.length === 0 ? 0 : levelPosition(groups, group!, 'group');
	const m = past.length;
	const time = Float64Array.from(occasions, (o) => o.time);
	const visit = visitsOf(model, occasions);
	const rowAt = meanRows(model);
	const rows = occasions.map((o, i) =>
		rowAt(o.time, visit[i]!, level, covariateWeights(spec.covariates, o, model.scale))
	);
	const mean = (row: readonly number[]) =>
		row.reduce((sum, x, j) => sum + x * spec.coefficients[j]!, 0);
	const natural = naturalModel(
		{ visits, groups },
		dependence.layout,
		Float64Array.from(dependence.working),
		dependence.scale,
		[]
	);
	const v = covarianceOf(natural, dependence, time, visit, level);

	// L⁻¹ of the past on [c, y − Xβ, X]: every product below is one of its columns with another.
	const factor = new Float64Array(m * m);
	for (let i = 0; i < m; i++) for (let j = 0; j < m; j++) factor[i * m + j] = v[i * (m + 1) + j]!;
	if (m > 0 && choleskyInPlace(factor, m) >= 0) {
		throw new StatsError(
			'repeated-occasion',
			'Two of the past occasions are one and the same to this model, so nothing can be predicted from both.'
		);
	}
	const p = spec.coefficients.length;
	const width = p + 2;
	const solved = new Float64Array(m * width);
	past.forEach(({ outcome }, i) => {
		solved[i * width] = v[i * (m + 1) + m]!;
		solved[i * width + 1] = analysed(outcome, model.scale, 'outcome') - mean(rows[i]!);
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
		for (let j = 0; j < p; j++) variance += d[i]! * spec.covariance[i]![j]! * d[j]!;
	const standardDeviation = Math.sqrt(variance);
	const reach = normalUpperQuantile((1 - confidence) / 2) * standardDeviation;
	const back = model.scale === 'log' ? Math.exp : (value: number) => value;
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
