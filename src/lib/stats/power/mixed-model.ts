import { buildModelDesign } from '../design/build-model-design.js';
import { combination, differenceAt, slopeDifference } from '../design/contrasts.js';
import { fitModel } from '../fit/fit-model.js';
import { precisionOf } from '../inference/precision.js';
import type { AnalysisPlan, SubjectEffects } from '../plan.js';
import type { AnalyseTrial } from './simulate.js';
import type { TrialData } from './trial.js';
import type { Question } from './types.js';

/** The subject effects a question was planned with. */
function subjectEffectsOf(question: Question): SubjectEffects {
	// With one outcome of each subject, level and error are one.
	if (question.question === 'mean-difference') return question.visits > 1 ? 'level' : 'none';
	if (question.times.length === 1) return 'none';
	const { level, slope, levelSlopeCovariance } = question.variances;
	if (slope === 0) return level === 0 ? 'none' : 'level';
	if (level === 0) return 'slope';
	return levelSlopeCovariance === 0 ? 'level-and-slope-uncorrelated' : 'level-and-slope';
}

/**
 * The analysis of a trial by the mixed model that the question was planned with: REML, Kenward–Roger.
 *
 * The mean and the subject effects are those of the plan. For means it is the outcomes after treatment, less the
 * subject's mean before (`change`) or with that as a covariate (`ancova`).
 * @throws (of the analysis) the `StatsError`s of design, fit and inference
 */
export function mixedModel(question: Question): AnalyseTrial {
	const means = question.question === 'mean-difference';
	const categorical = !means && question.mean === 'categorical';
	const plan: AnalysisPlan = {
		outcome: 'outcome',
		scale: 'identity',
		subject: 'subject',
		time: 'time',
		visit: categorical ? 'visit' : null,
		group: 'arm',
		mean: {
			time: means ? 'none' : question.mean,
			groupByTime: !means,
			commonBaseline: !means && question.commonBaseline,
			covariates:
				means && question.analysis === 'ancova' ? [{ name: 'before', kind: 'numeric' }] : []
		},
		subjectEffects: subjectEffectsOf(question),
		visitEffects: false,
		errors: { structure: 'independent', along: 'time', varianceBy: 'none' },
		method: 'reml',
		degreesOfFreedom: 'kenward-roger'
	};
	const { subjectEffects, visitEffects, errors, method } = plan;
	return (data) => {
		const built = buildModelDesign(
			means ? afterTreatment(data, question.analysis) : columnsOf(data),
			plan
		);
		const contrast =
			question.question === 'slope-difference'
				? slopeDifference(built, '1', '0')
				: question.question === 'difference-at-visit'
					? differenceAt(
							built,
							'1',
							'0',
							categorical
								? { visit: String(question.times.indexOf(question.time)) }
								: { time: question.time }
						)
					: combination(built, { 'group 1': 1 }, 'The difference of means');
		const fit = fitModel(built.design, { subjectEffects, visitEffects, errors }, { method });
		const precision = precisionOf(fit, plan.degreesOfFreedom);
		const { estimate, standardError, df } = precision.test(contrast.inside, 0.95);
		return { estimate, se: standardError, df };
	};
}

function columnsOf({ subject, arm, visit, time, outcome }: TrialData) {
	return {
		subject: Array.from(subject),
		arm: Array.from(arm),
		visit: Array.from(visit),
		time: Float64Array.from(time),
		outcome: Float64Array.from(outcome)
	};
}

/** Rows at times above 0, with the subject's mean of the rows before. */
function afterTreatment(data: TrialData, analysis: 'follow-up' | 'change' | 'ancova') {
	const sums = new Float64Array(data.subjects);
	const counts = new Int32Array(data.subjects);
	data.time.forEach((t, i) => {
		if (t > 0) return;
		sums[data.subject[i]!]! += data.outcome[i]!;
		counts[data.subject[i]!]!++;
	});
	const rows = [...data.time.keys()].filter((i) => data.time[i]! > 0);
	const before = rows.map((i) => sums[data.subject[i]!]! / Math.max(1, counts[data.subject[i]!]!));
	return {
		subject: rows.map((i) => data.subject[i]!),
		arm: rows.map((i) => data.arm[i]!),
		time: Float64Array.from(rows, (i) => data.time[i]!),
		before: Float64Array.from(before),
		outcome: Float64Array.from(
			rows,
			(i, at) => data.outcome[i]! - (analysis === 'change' ? before[at]! : 0)
		)
	};
}
