import { buildModelDesign } from '../design/build-model-design.js';
import type { Columns } from '../design/columns.js';
import { coefficientAt, combination } from '../design/contrasts.js';
import { levelPosition } from '../design/mean-terms.js';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import { fitModel, fitPrepared, type ModelFit } from '../fit/fit-model.js';
import { prepareModel, withOutcome } from '../fit/prepare-model.js';
import { outcomeDrawer } from '../fit/subject-view.js';
import { precisionOf } from '../inference/precision.js';
import { choleskyInPlace } from '../numeric/dense.js';
import { toCoefficients } from '../numeric/orthonormal.js';
import { randomStream } from '../numeric/random.js';
import type { AnalysisPlan } from '../plan.js';
import type { Supervision, TestedEstimate } from '../types.js';
import { completeColumns } from './complete.js';
import { drawMissing } from './impute.js';
import type { Due } from './occasions.js';
import { poolEstimates, type Pooled } from './pool.js';

export interface SensitivityOptions {
	/** By how much outcomes after dropout are shifted; analysed scale (a log ratio on a log scale). */
	deltas: readonly number[];
	/** What δ is multiplied with, by group; groups not named are not shifted. Left out: 1 for everybody. */
	shift?: Readonly<Record<string, number>>;
	/** Data sets imputed; 50 unless said otherwise. */
	imputations?: number;
	seed: number;
	/** See `occasionsOf`; every visit unless said otherwise. */
	due?: Due;
	/**
	 * `drawn`: coefficients and covariance of each imputation are those of a refit to outcomes drawn from the fitted model, so
	 * that what is not known of either is in the imputations. `held`: the covariance is the estimated one and coefficients are
	 * drawn from their normal distribution. `drawn` unless said otherwise.
	 */
	covariance?: 'drawn' | 'held';
}

/** Imputations `from` to `to` − 1: plain data that may cross threads; see `sensitivityReplicates`. */
export interface SensitivityReplicates {
	from: number;
	to: number;
	deltas: number[];
	contrasts: string[];
	confidence: number;
	/** Outcomes imputed in each data set, and of how many subjects. */
	imputed: number;
	subjects: number;
	/** Subjects never observed, who are left out. */
	neverObserved: number;
	/** The model's own estimates, missing at random. */
	own: TestedEstimate[];
	/** By imputation, then δ, then contrast. */
	estimate: Float64Array;
	variance: Float64Array;
	df: Float64Array;
	/** Imputations whose refit failed, so that the covariance was held. */
	held: number;
}

export interface SensitivityRow extends Pooled {
	delta: number;
}

export interface ContrastSensitivity {
	name: string;
	/** Missing at random, from the model itself. */
	own: TestedEstimate;
	rows: SensitivityRow[];
	/**
	 * The δ nearest zero on either side at which the interval begins or ceases to hold zero, by straight lines between the δ
	 * asked for; null where there is none among them.
	 */
	tipping: { below: number | null; above: number | null };
}

export interface Sensitivity {
	imputations: number;
	imputed: number;
	subjects: number;
	neverObserved: number;
	held: number;
	contrasts: ContrastSensitivity[];
}

/** The rows of a design that are not marked, with the subjects that have one. */
function unmarked(design: ModelDesign, marked: Uint8Array): ModelDesign {
	const index: number[] = [];
	const start = [0];
	const subjects: number[] = [];
	for (let s = 0; s < design.subjects.length; s++) {
		for (let i = design.subjectStart[s]!; i < design.subjectStart[s + 1]!; i++)
			if (!marked[i]) index.push(i);
		if (index.length === start.at(-1)) continue;
		start.push(index.length);
		subjects.push(s);
	}
	const n = index.length;
	const x = new Float64Array(n * design.p);
	for (let j = 0; j < design.p; j++)
		index.forEach((i, at) => (x[j * n + at] = design.x[j * design.n + i]!));
	return {
		...design,
		n,
		x,
		y: Float64Array.from(index, (i) => design.y[i]!),
		time: Float64Array.from(index, (i) => design.time[i]!),
		visit: Int32Array.from(index, (i) => design.visit[i]!),
		rowOf: Int32Array.from(index, (i) => design.rowOf[i]!),
		subjectStart: Int32Array.from(start),
		subjects: subjects.map((s) => design.subjects[s]!),
		subjectGroup: Int32Array.from(subjects, (s) => design.subjectGroup[s]!)
	};
}

/** Errors: `bad-option`, `unknown-level`. */
function shiftsOf(groups: readonly string[], { deltas, shift }: SensitivityOptions): number[] {
	if (deltas.length === 0 || !deltas.every(Number.isFinite))
		throw new StatsError('bad-option', 'At least one shift δ is needed, each a finite number.');
	if (!shift) return groups.length === 0 ? [1] : groups.map(() => 1);
	const shifts = groups.map(() => 0);
	for (const [group, factor] of Object.entries(shift)) {
		if (!Number.isFinite(factor))
			throw new StatsError(
				'bad-option',
				`The shift of the group “${group}” is ${factor}; it must be finite.`
			);
		shifts[levelPosition(groups, group, 'group')] = factor;
	}
	return shifts;
}

type Drawn = Pick<ModelFit, 'natural' | 'scale' | 'beta' | 'prepared'>;

/** Coefficients drawn from their normal distribution, the covariance held. Errors: `singular-information`. */
function coefficientsDrawn(fit: ModelFit, normal: () => number): Drawn {
	const { basis, design } = fit.prepared;
	const { p } = design;
	const factor = fit.coordinateCovariance.slice();
	if (choleskyInPlace(factor, p) >= 0)
		throw new StatsError(
			'singular-information',
			'The covariance of the coefficients is singular, so they cannot be drawn.'
		);
	const z = Array.from({ length: p }, normal);
	const drawn = fit.coordinates.map((c, i) => {
		let value = c;
		for (let j = 0; j <= i; j++) value += factor[i * p + j]! * z[j]!;
		return value;
	});
	return { ...fit, beta: toCoefficients(basis, drawn) };
}

/**
 * Imputes outcomes after dropout, shifts them by each δ and analyses each data set as planned; imputations `from` to
 * `to` − 1.
 *
 * Imputation k draws from stream k of the seed and from nothing else, so that any split gives the same bits; all δ share its
 * draws. Contrasts are those of the plan, or every coefficient when it has none. Only what comes after a subject's last
 * observed outcome is imputed; gaps before it are left to the model. Needs a visit column.
 * Errors: those of the design and the fit; `bad-option`, `unknown-level`, `stopped`.
 * Source: pattern mixture by δ, Rubin (1977), JASA 72:538-543; Carpenter & Kenward (2013), Multiple Imputation and its
 * Application, chapter 10.
 */
export function sensitivityReplicates(
	columns: Columns,
	plan: AnalysisPlan,
	options: SensitivityOptions,
	[from, to]: readonly [number, number],
	{ onProgress, shouldStop }: Supervision = {}
): SensitivityReplicates {
	const stop = () => {
		if (shouldStop?.()) throw new StatsError('stopped', 'The imputations were stopped.');
	};
	const { deltas, seed, covariance = 'drawn' } = options;
	if (!Number.isInteger(from) || !Number.isInteger(to) || from < 0 || to < from)
		throw new StatsError(
			'bad-option',
			`Imputations are counted from 0 up, not from ${from} to ${to}.`
		);
	stop();
	const whole = completeColumns(columns, plan, options.due);
	const built = buildModelDesign(whole.columns, plan);
	const { design } = built;
	const shifts = shiftsOf(design.groups, options);
	const marked = Uint8Array.from(design.rowOf, (row) => whole.impute[row]!);
	const asked = plan.contrasts?.length
		? plan.contrasts.map(({ name, weights }) => ({
				name,
				weights: combination(built, weights, `The contrast “${name}”`).inside
			}))
		: design.names.map((name, j) => ({ name, weights: coefficientAt(built, j).inside }));
	const { method } = plan;
	const confidence = plan.confidence ?? 0.95;
	const supervision = shouldStop ? { shouldStop } : {};
	const fit = fitModel(unmarked(design, marked), plan, { method, ...supervision });
	const precision = precisionOf(fit, plan.degreesOfFreedom);
	const imputed = marked.reduce((sum, one) => sum + one, 0);
	const shift = new Float64Array(design.n);
	const lost = new Set<number>();
	for (let s = 0; s < design.subjects.length; s++)
		for (let i = design.subjectStart[s]!; i < design.subjectStart[s + 1]!; i++)
			if (marked[i]) {
				shift[i] = shifts[design.subjectGroup[s]!]!;
				lost.add(s);
			}
	const count = imputed === 0 ? 0 : to - from;
	const size = count * deltas.length * asked.length;
	const result: SensitivityReplicates = {
		from,
		to,
		deltas: [...deltas],
		contrasts: asked.map((a) => a.name),
		confidence,
		imputed,
		subjects: lost.size,
		neverObserved: whole.neverObserved,
		own: asked.map(({ weights }) => precision.test(weights, confidence)),
		estimate: new Float64Array(size),
		variance: new Float64Array(size),
		df: new Float64Array(size),
		held: 0
	};
	if (count === 0) return result;
	const draw = outcomeDrawer(fit);
	const prepared = prepareModel(design, fit.dependence);
	/** The refit to a drawn data set; null when that cannot be fitted. */
	const refit = (normal: () => number): ModelFit | null => {
		try {
			const again = fitPrepared(withOutcome(fit.prepared, draw(normal)), {
				method,
				...supervision
			});
			return again.converged ? again : null;
		} catch (error) {
			if (error instanceof StatsError && error.code !== 'stopped') return null;
			throw error;
		}
	};
	let at = 0;
	for (let k = 0; k < count; k++) {
		const { normal } = randomStream(seed, from + k);
		let model: Drawn | null = covariance === 'drawn' ? refit(normal) : null;
		if (!model) {
			if (covariance === 'drawn') result.held++;
			model = coefficientsDrawn(fit, normal);
		}
		const base = drawMissing(design, marked, model, normal);
		let start: Float64Array | undefined;
		for (const delta of deltas) {
			stop();
			const y = base.map((v, i) => v + delta * shift[i]!);
			const complete = fitPrepared(withOutcome(prepared, y), {
				method,
				...supervision,
				...(start ? { start } : {})
			});
			// A component at zero has no slope to leave it by, so the next search begins anew.
			start = complete.boundary.length === 0 ? Float64Array.from(complete.working) : undefined;
			const { test } = precisionOf(complete, plan.degreesOfFreedom);
			for (const { weights } of asked) {
				const { estimate, standardError, df } = test(weights, confidence);
				result.estimate[at] = estimate;
				result.variance[at] = standardError ** 2;
				result.df[at] = df;
				at++;
			}
		}
		onProgress?.((k + 1) / count);
	}
	return result;
}

/** Where straight lines between the points change sign, nearest zero on either side. */
function tippingPoints(deltas: readonly number[], margin: readonly number[]) {
	const order = deltas.map((_, i) => i).sort((a, b) => deltas[a]! - deltas[b]!);
	const crossings: number[] = [];
	for (let i = 0; i + 1 < order.length; i++) {
		const [a, b] = [order[i]!, order[i + 1]!];
		const [u, v] = [margin[a]!, margin[b]!];
		if (u > 0 === v > 0) continue;
		crossings.push(deltas[a]! + (u / (u - v)) * (deltas[b]! - deltas[a]!));
	}
	return {
		below: crossings.filter((d) => d < 0).at(-1) ?? null,
		above: crossings.find((d) => d >= 0) ?? null
	};
}

/**
 * Imputations made in parts put together by Rubin's rules, contrast by contrast and δ by δ.
 *
 * With nothing to impute every δ gives the model's own estimate. Errors: `bad-option` when the parts do not make up 0 to M
 * or are of different questions; those of `poolEstimates`.
 */
export function poolSensitivity(parts: readonly SensitivityReplicates[]): Sensitivity {
	const sorted = [...parts].sort((a, b) => a.from - b.from);
	const [first] = sorted;
	const question = (p: SensitivityReplicates) =>
		JSON.stringify([p.deltas, p.contrasts, p.imputed, p.confidence, p.own]);
	const gap = sorted.some((p, i) => p.from !== (i === 0 ? 0 : sorted[i - 1]!.to));
	if (!first || gap || sorted.some((p) => question(p) !== question(first)))
		throw new StatsError(
			'bad-option',
			'The imputations do not fit together: they must be of one question and follow on one another from 0.'
		);
	const { deltas, contrasts, confidence } = first;
	const rowOf = (c: number, d: number): SensitivityRow => {
		const delta = deltas[d]!;
		const own = first.own[c]!;
		if (first.imputed === 0) {
			const { standardError: se, ...rest } = own;
			return { delta, ...rest, se, missingShare: 0, monteCarloSe: 0 };
		}
		const all = (name: 'estimate' | 'variance' | 'df') =>
			sorted.flatMap((p) =>
				Array.from(
					{ length: p.to - p.from },
					(_, k) => p[name][(k * deltas.length + d) * contrasts.length + c]!
				)
			);
		return { delta, ...poolEstimates(all('estimate'), all('variance'), all('df'), confidence) };
	};
	return {
		imputations: sorted.at(-1)!.to,
		imputed: first.imputed,
		subjects: first.subjects,
		neverObserved: first.neverObserved,
		held: sorted.reduce((sum, p) => sum + p.held, 0),
		contrasts: contrasts.map((name, c) => {
			const rows = deltas.map((_, d) => rowOf(c, d));
			// Above zero while the interval holds no zero.
			const margin = rows.map((r) => Math.max(r.lower, -r.upper));
			return { name, own: first.own[c]!, rows, tipping: tippingPoints(deltas, margin) };
		})
	};
}

/** The whole δ-adjusted sensitivity analysis in one go; see `sensitivityReplicates` and `poolSensitivity`. */
export function deltaSensitivity(
	columns: Columns,
	plan: AnalysisPlan,
	options: SensitivityOptions,
	supervision: Supervision = {}
): Sensitivity {
	const { imputations = 50 } = options;
	if (!Number.isInteger(imputations) || imputations < 2)
		throw new StatsError(
			'bad-option',
			`${imputations} imputations cannot be pooled; at least 2 are needed.`
		);
	return poolSensitivity([
		sensitivityReplicates(columns, plan, options, [0, imputations], supervision)
	]);
}
