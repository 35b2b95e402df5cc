import { StatsError } from '../errors.js';
import { normalEquivalent } from '../monitoring/compare.js';
import { runningBoundaries, type SeenLook } from '../monitoring/running.js';
import type { MonitoringDesign } from '../monitoring/types.js';
import { normalUpperQuantile, studentUpperQuantile } from '../numeric/distribution.js';
import { randomStream } from '../numeric/random.js';
import type { Supervision } from '../types.js';
import { checkQuestion } from './check.js';
import { drawTrial, firstSubjects, layoutOf, type TrialData } from './trial.js';
import type { Question } from './types.js';

/** What an analysis gives back of a trial; `df` may be Infinity. */
export interface TrialEstimate {
	estimate: number;
	se: number;
	df: number;
}

/** Any analysis: the mixed model's or another. A `StatsError` it throws counts as a look without an answer. */
export type AnalyseTrial = (data: TrialData) => TrialEstimate;

export interface SimulatedStudy {
	question: Question;
	/** [arm 0, arm 1]. */
	subjects: readonly [number, number];
	/** The difference that is planned for; its sign is the direction of benefit. */
	difference: number;
	alpha: number;
	sides: 1 | 2;
	/** Null: one look at the end. A look sees all visits of the share of subjects its fraction says. */
	monitoring: MonitoringDesign | null;
	/** 1/variance planned for the end; what the looks' information is measured by. */
	maximumInformation: number;
	/** Of the interval whose coverage is counted; 0.95 unless said otherwise. */
	confidence?: number;
	seed: number;
}

const verdicts = ['none', 'above', 'below', 'futility', 'failed'] as const;

/** Replicates `from` to `to` − 1 under one true difference, in columns; plain typed arrays that may cross threads. */
export interface Replicates {
	from: number;
	to: number;
	truth: number;
	/** Look at which each stopped, from 1. */
	look: Uint8Array;
	/** Position in none, above, below, futility, failed. */
	verdict: Uint8Array;
	/** At stopping; 0 where the analysis failed. */
	estimate: Float64Array;
	se: Float64Array;
	covered: Uint8Array;
}

/**
 * Runs replicates `from` to `to` − 1 of a study whose true difference is `truth`.
 *
 * Replicate k draws from stream k of the seed and from nothing else: any split into ranges, on any number of
 * workers, gives the same bits. Boundaries come from the information the replicate's own looks have.
 * @throws StatsError `stopped` when asked to stop
 */
export function simulateReplicates(
	study: SimulatedStudy,
	truth: number,
	analyse: AnalyseTrial,
	[from, to]: readonly [number, number],
	{ onProgress, shouldStop }: Supervision = {}
): Replicates {
	checkQuestion(study.question);
	if (!Number.isInteger(from) || !Number.isInteger(to) || from < 0 || to < from)
		throw new StatsError(
			'bad-option',
			`Replicates are counted from 0 up, not from ${from} to ${to}.`
		);
	if (!study.subjects.every((n) => Number.isInteger(n) && n >= 1))
		throw new StatsError(
			'bad-option',
			`Each arm needs a whole number of subjects, not ${study.subjects.join(' and ')}.`
		);
	const layout = layoutOf(study.question);
	const count = to - from;
	const result: Replicates = {
		from,
		to,
		truth,
		look: new Uint8Array(count),
		verdict: new Uint8Array(count),
		estimate: new Float64Array(count),
		se: new Float64Array(count),
		covered: new Uint8Array(count)
	};
	for (let i = 0; i < count; i++) {
		if (shouldStop?.()) throw new StatsError('stopped', 'The simulation was stopped.');
		const data = drawTrial(layout, study.subjects, truth, randomStream(study.seed, from + i));
		const outcome = runOne(study, data, analyse);
		result.look[i] = outcome.look;
		result.verdict[i] = verdicts.indexOf(outcome.verdict);
		if (outcome.found) {
			const { estimate, se, df } = outcome.found;
			result.estimate[i] = estimate;
			result.se[i] = se;
			const tail = (1 - (study.confidence ?? 0.95)) / 2;
			const quantile = df === Infinity ? normalUpperQuantile(tail) : studentUpperQuantile(tail, df);
			result.covered[i] = Math.abs(estimate - truth) <= quantile * se ? 1 : 0;
		}
		onProgress?.((i + 1) / count);
	}
	return result;
}

interface Outcome {
	look: number;
	verdict: (typeof verdicts)[number];
	found: TrialEstimate | null;
}

/** One trial followed from look to look until it stops. */
function runOne(study: SimulatedStudy, data: TrialData, analyse: AnalyseTrial): Outcome {
	const { monitoring, sides } = study;
	const fractions = monitoring?.plan.informationFractions ?? [1];
	const direction = Math.sign(study.difference);
	const seen: SeenLook[] = [];
	let found: TrialEstimate | null = null;
	for (const [k, fraction] of fractions.entries()) {
		const final = k === fractions.length - 1;
		const now = final ? data : firstSubjects(data, Math.round(fraction * data.subjects));
		found = attempt(analyse, now);
		if (!found) {
			if (final) return { look: k + 1, verdict: 'failed', found };
			continue;
		}
		const z = direction * normalEquivalent({ t: found.estimate / found.se, df: found.df }).z;
		seen.push({ information: found.se ** -2, final });
		const bounds = monitoring
			? runningBoundaries(monitoring, study.maximumInformation, seen).at(-1)!
			: { efficacyZ: normalUpperQuantile(study.alpha / sides), futilityZ: null };
		const { efficacyZ, futilityZ } = bounds;
		const look = k + 1;
		if (efficacyZ !== null && z >= efficacyZ) return { look, verdict: 'above', found };
		if (efficacyZ !== null && sides === 2 && z <= -efficacyZ)
			return { look, verdict: 'below', found };
		if (!final && futilityZ !== null && z <= futilityZ) return { look, verdict: 'futility', found };
	}
	return { look: fractions.length, verdict: 'none', found };
}

/** The estimate, or null where the analysis has no answer to give. */
function attempt(analyse: AnalyseTrial, data: TrialData): TrialEstimate | null {
	try {
		const found = analyse(data);
		const { estimate, se, df } = found;
		return Number.isFinite(estimate) && se > 0 && Number.isFinite(se) && df > 0 ? found : null;
	} catch (error) {
		if (error instanceof StatsError && error.code !== 'stopped') return null;
		throw error;
	}
}

/** Ranges that follow on each other, put together in order: the same as one range over all. */
export function joinReplicates(parts: readonly Replicates[]): Replicates {
	const sorted = [...parts].sort((a, b) => a.from - b.from);
	const first = sorted[0];
	if (!first) throw new StatsError('no-data', 'There are no replicates to put together.');
	sorted.forEach((part, i) => {
		if (i > 0 && (part.from !== sorted[i - 1]!.to || part.truth !== first.truth))
			throw new StatsError('shape-mismatch', 'Replicates must follow on each other without gaps.');
	});
	const to = sorted[sorted.length - 1]!.to;
	const joined: Replicates = {
		from: first.from,
		to,
		truth: first.truth,
		look: new Uint8Array(to - first.from),
		verdict: new Uint8Array(to - first.from),
		estimate: new Float64Array(to - first.from),
		se: new Float64Array(to - first.from),
		covered: new Uint8Array(to - first.from)
	};
	for (const part of sorted)
		for (const column of ['look', 'verdict', 'estimate', 'se', 'covered'] as const)
			joined[column].set(part[column], part.from - first.from);
	return joined;
}

/** A figure from simulation and its Monte Carlo standard error. */
export interface Simulated {
	estimate: number;
	error: number;
}

export interface SimulationSummary {
	replicates: number;
	/** The analysis had no answer at the last look it came to. */
	failed: number;
	truth: number;
	/** Share that crossed for efficacy in the planned direction: power, or one side's type I error. */
	above: Simulated;
	/** Share that crossed on either side. */
	eitherSide: Simulated;
	/** Mean of estimate − truth at stopping: early stopping makes it differ from 0. */
	bias: Simulated;
	/** Standard deviation of the estimates, and the mean of their standard errors. */
	empiricalDeviation: Simulated;
	meanStandardError: Simulated;
	/** Share of intervals, not adjusted for the looks, that hold the truth. */
	coverage: Simulated;
	/** For each look, the share that stopped there, and of those for efficacy above and for futility. */
	stopping: { look: number; share: Simulated; efficacy: Simulated; futility: Simulated }[];
	/** Mean share of the subjects enrolled at stopping. */
	expectedFraction: Simulated;
}

function share(count: number, n: number): Simulated {
	const p = count / n;
	return { estimate: p, error: Math.sqrt((p * (1 - p)) / n) };
}

function average(values: readonly number[]): Simulated {
	const n = values.length;
	if (n < 2) return { estimate: values[0] ?? 0, error: 0 };
	const mean = values.reduce((a, b) => a + b, 0) / n;
	const squares = values.reduce((sum, v) => sum + (v - mean) ** 2, 0);
	return { estimate: mean, error: Math.sqrt(squares / (n - 1) / n) };
}

/** Power or type I error, bias, coverage and stopping times of replicates, each with its Monte Carlo error. */
export function summariseReplicates(
	study: SimulatedStudy,
	replicates: Replicates
): SimulationSummary {
	const n = replicates.to - replicates.from;
	if (n === 0) throw new StatsError('no-data', 'There are no replicates to summarise.');
	const fractions = study.monitoring?.plan.informationFractions ?? [1];
	const is = (i: number, verdict: (typeof verdicts)[number]) =>
		verdicts[replicates.verdict[i]!] === verdict;
	const all = Array.from({ length: n }, (_, i) => i);
	const answered = all.filter((i) => !is(i, 'failed'));
	const count = (test: (i: number) => boolean) => share(all.filter(test).length, n);
	const deviations = answered.map((i) => replicates.estimate[i]! - replicates.truth);
	const bias = average(deviations);
	const deviation = bias.error * Math.sqrt(answered.length);
	return {
		replicates: n,
		failed: n - answered.length,
		truth: replicates.truth,
		above: count((i) => is(i, 'above')),
		eitherSide: count((i) => is(i, 'above') || is(i, 'below')),
		bias,
		empiricalDeviation: {
			estimate: deviation,
			error: answered.length > 1 ? deviation / Math.sqrt(2 * (answered.length - 1)) : 0
		},
		meanStandardError: average(answered.map((i) => replicates.se[i]!)),
		coverage: share(
			answered.filter((i) => replicates.covered[i] === 1).length,
			Math.max(1, answered.length)
		),
		stopping: fractions.map((_, k) => ({
			look: k + 1,
			share: count((i) => replicates.look[i] === k + 1),
			efficacy: count((i) => replicates.look[i] === k + 1 && is(i, 'above')),
			futility: count((i) => replicates.look[i] === k + 1 && is(i, 'futility'))
		})),
		expectedFraction: average(all.map((i) => fractions[replicates.look[i]! - 1]!))
	};
}
