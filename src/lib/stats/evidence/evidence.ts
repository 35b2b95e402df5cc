import { buildModelDesign } from '../design/build-model-design.js';
import type { Columns } from '../design/columns.js';
import { combination } from '../design/contrasts.js';
import type { ModelDesign } from '../design/model-design.js';
import { ENGINE_VERSION } from '../engine.js';
import { StatsError } from '../errors.js';
import type { AnalysisPlan } from '../plan.js';
import type { Supervision } from '../types.js';
import { comparisonsOf } from './compare.js';
import { planEvidence } from './plan-evidence.js';
import { evidencePart, joinEvidence } from './refits.js';
import { sentencesOf } from './sentences.js';
import type {
	EvidenceOptions,
	EvidencePart,
	EvidencePlan,
	EvidenceResult,
	FittedMember
} from './types.js';
import { answersOf } from './verdict.js';

function effectiveSizesOf(plan: EvidencePlan, standing: readonly string[]) {
	const fitted = plan.models.filter((m): m is FittedMember => m.fitted);
	const chosen = fitted.filter((m) => standing.includes(m.id));
	const sizes = (chosen.length > 0 ? chosen : fitted).map((m) => m.effectiveSampleSize);
	const span = (values: number[]) => ({
		lowest: Math.min(...values),
		highest: Math.max(...values)
	});
	const ofContrast = sizes.map((s) => s.contrast).filter((v) => v !== null);
	return {
		mean: span(sizes.map((s) => s.mean)),
		contrast: plan.contrast === null ? null : { name: plan.contrast, ...span(ofContrast) }
	};
}

/**
 * The answer from a plan and all its parts, as plain data that JSON can hold.
 *
 * The parts together hold every replicate once, from 0 to the plan's number of refits. Errors: `shape-mismatch`, `no-data`.
 */
export function gatherEvidence(plan: EvidencePlan, parts: readonly EvidencePart[]): EvidenceResult {
	const whole = joinEvidence(parts);
	if (whole.from !== 0 || whole.to !== plan.refits)
		throw new StatsError(
			'shape-mismatch',
			`The parts hold refits ${whole.from} to ${whole.to} of ${plan.refits}.`
		);
	const comparisons = comparisonsOf(plan, whole);
	const answers = answersOf(plan, comparisons);
	let [refits, restarted, failed] = [0, 0, 0];
	for (const world of whole.worlds) {
		restarted += world.restarted;
		for (const column of world.failed)
			for (const mark of column) {
				refits++;
				failed += mark;
			}
	}
	const result = {
		engine: ENGINE_VERSION,
		method: plan.method,
		refits: plan.refits,
		seed: plan.seed,
		observations: plan.design.n,
		subjects: plan.design.subjects.length,
		models: plan.models,
		visitsInAll: plan.visitsInAll,
		comparisons,
		answers,
		effectiveSampleSize: effectiveSizesOf(plan, answers.standing),
		refitted: { refits, restarted, failed }
	};
	return { ...result, sentences: sentencesOf(plan, result) };
}

/**
 * What the data tell of dependence: whether subjects keep a lasting offset, whether it fades, whether visits move all
 * together; in words and in numbers, calibrated by the parametric bootstrap.
 *
 * Nine models are fitted: independent errors; a level; level and slope; serial errors; these with noise; level and serial,
 * with noise and without; level, and serial errors, with visit effects. Data sets are drawn under a fitted model and refitted
 * by it and its rivals, and an observed gain in log-likelihood is judged by where it falls among theirs. `answersOf` says how
 * that becomes a verdict. `planEvidence`, `evidencePart` and `gatherEvidence` are the same in steps, for a pool of threads.
 *
 * Log-likelihoods are of `method`; a restricted one depends on the coding of X, which is the same for all.
 * Errors: those of `planEvidence` and `evidencePart`.
 * Source: Cox (1962), J. R. Stat. Soc. B 24:406-424, for models that are not nested; Williams (1970), Biometrics 26:23-32, for
 * drawing under each of them; Davison & Hinkley (1997), Bootstrap Methods and their Application, 4.2, for the p-values.
 */
export function evidence(design: ModelDesign, options: EvidenceOptions = {}): EvidenceResult {
	options.onProgress?.(0);
	const plan = planEvidence(design, options);
	const part = evidencePart(plan, 0, plan.refits, options);
	return gatherEvidence(plan, [part]);
}

/** Which of a plan's contrasts, and what else `planEvidence` takes. */
export type ColumnsEvidenceOptions = Omit<EvidenceOptions, 'contrast' | 'logLikelihoodShift'> &
	Supervision & {
		/** By name; the first when left out. */
		contrast?: string;
	};

/**
 * The plan of the evidence for columns and an analysis plan: its mean, its scale and one of its contrasts; the dependence
 * it asks for plays no part, but serial errors go along what it says. Errors: those of `buildModelDesign`,
 * `unknown-coefficient`, `not-estimable`, `bad-plan` for a contrast the plan does not have, and those of `planEvidence`.
 */
export function planEvidenceOf(
	columns: Columns,
	plan: AnalysisPlan,
	options: ColumnsEvidenceOptions = {}
): EvidencePlan {
	const { contrast: wanted, ...rest } = options;
	const built = buildModelDesign(columns, plan);
	const asked =
		wanted === undefined ? plan.contrasts?.[0] : plan.contrasts?.find((c) => c.name === wanted);
	if (wanted !== undefined && !asked)
		throw new StatsError('bad-plan', `The plan has no contrast named “${wanted}”.`);
	const contrast = asked && {
		name: asked.name,
		weights: combination(built, asked.weights, `The contrast “${asked.name}”`).inside
	};
	const shift =
		built.ownScale && (options.method ?? plan.method) === 'reml'
			? built.ownScale.logDeterminant
			: 0;
	return planEvidence(built.design, {
		method: plan.method,
		along: plan.errors.along,
		...rest,
		logLikelihoodShift: shift,
		...(contrast ? { contrast } : {})
	});
}
