import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { chiSquareTail } from '../numeric/chi-square.js';
import type { ErrorStructure, SubjectEffects } from '../plan.js';

export interface LikelihoodRatioTest {
	/** Twice the gain in log-likelihood, never below 0. */
	statistic: number;
	/** Weights of chi-squared with 0, 1, 2 … degrees of freedom; null where no such mixture is known. */
	mixture: number[] | null;
	/** null when the parametric bootstrap has to give it. */
	p: number | null;
	/** A whole sentence on how the p-value comes about, or why there is none. */
	explanation: string;
}

const half = [0.5, 0.5];

/** Smaller first; the mixture each step needs. */
const subjectSteps: Partial<Record<`${SubjectEffects}>${SubjectEffects}`, number[]>> = {
	'none>level': half,
	'none>slope': half,
	'level>level-and-slope': [0, 0.5, 0.5],
	'level>level-and-slope-uncorrelated': half,
	'slope>level-and-slope-uncorrelated': half,
	'slope>level-and-slope': [0, 0.5, 0.5],
	'level-and-slope-uncorrelated>level-and-slope': [0, 1]
};

/** Structures that hold another as a point inside their space. */
const inside: Record<ErrorStructure, ErrorStructure[]> = {
	independent: [],
	serial: ['independent'],
	'serial-with-noise': [],
	'compound-symmetry': ['independent'],
	toeplitz: ['independent', 'serial', 'compound-symmetry'],
	unstructured: ['independent', 'serial', 'compound-symmetry', 'toeplitz']
};

const none = (statistic: number, explanation: string): LikelihoodRatioTest => ({
	statistic,
	mixture: null,
	p: null,
	explanation
});

function mixed(statistic: number, mixture: number[], explanation: string): LikelihoodRatioTest {
	const p = mixture.reduce(
		(sum, w, df) => sum + (df === 0 ? (statistic > 0 ? 0 : w) : w * chiSquareTail(statistic, df)),
		0
	);
	return { statistic, mixture, p, explanation };
}

function refuseUnlike(a: ModelFit, b: ModelFit): void {
	const [x, y] = [a.prepared, b.prepared];
	if (a.method !== b.method)
		throw new StatsError(
			'bad-option',
			'One fit is by REML and the other by ML; their likelihoods cannot be compared.'
		);
	if (x.design.n !== y.design.n || x.y.some((v, i) => v !== y.y[i]))
		throw new StatsError(
			'bad-option',
			'The two fits are to different outcomes; their likelihoods cannot be compared.'
		);
	const same = x.design.p === y.design.p && x.design.x.every((v, i) => v === y.design.x[i]);
	if (!same)
		throw new StatsError(
			'bad-option',
			a.method === 'reml'
				? 'The two fits have different means; REML likelihoods can only be compared between equal means.'
				: 'The two fits have different means; this test compares dependence between equal means.'
		);
}

/**
 * Twice the gain in log-likelihood of `larger` over `smaller`, two fits that differ in dependence only, and its p-value.
 *
 * One variance against zero: ½ χ²₀ + ½ χ²₁; a slope's variance and covariance: ½ χ²₁ + ½ χ²₂; parameters inside their
 * space: χ² on their number. For a visit variance, level against serial, and several edges at once `p` is null.
 * Errors: `bad-option` when the fits cannot be compared.
 * Source: Self & Liang (1987), JASA 82:605-610; Stram & Lee (1994), Biometrics 50:1171-1177.
 */
export function likelihoodRatioTest(smaller: ModelFit, larger: ModelFit): LikelihoodRatioTest {
	refuseUnlike(smaller, larger);
	const statistic = Math.max(0, 2 * (larger.logLikelihood - smaller.logLikelihood));
	const [a, b] = [smaller.dependence, larger.dependence];
	const subjects = a.subjectEffects !== b.subjectEffects;
	const visits = a.visitEffects !== b.visitEffects;
	const structure = a.errors.structure !== b.errors.structure || a.errors.along !== b.errors.along;
	const variance = a.errors.varianceBy !== b.errors.varianceBy;
	if (visits)
		return none(
			statistic,
			'The visit effects are as few as the visits, so no chi-squared mixture is known for their variance; use the parametric bootstrap.'
		);
	if (subjects && (structure || variance))
		return none(
			statistic,
			'Subject effects and errors differ at once, so the two models need not be nested; use the parametric bootstrap.'
		);
	if (subjects) {
		const mixture = subjectSteps[`${a.subjectEffects}>${b.subjectEffects}`];
		if (!mixture)
			return none(
				statistic,
				'More than one variance differs, or the first model does not lie within the second; use the parametric bootstrap.'
			);
		return mixed(
			statistic,
			mixture,
			mixture[0] === 0 && mixture[1] === 1
				? 'A covariance of zero lies inside its space: chi-squared with one degree of freedom.'
				: mixture.length === 2
					? 'A variance of zero is the edge of its space: half chi-squared with one degree of freedom, half zero.'
					: 'A variance of zero and its covariance: half chi-squared with one, half with two degrees of freedom.'
		);
	}
	if (!structure && !variance)
		throw new StatsError('bad-option', 'The two fits have the same dependence.');
	const serial = b.errors.structure === 'serial' || b.errors.structure === 'serial-with-noise';
	if (structure && serial && b.errors.along === 'time' && !variance) {
		const fromIndependent = a.errors.structure === 'independent' && b.errors.structure === 'serial';
		const toNoise = a.errors.structure === 'serial' && b.errors.structure === 'serial-with-noise';
		if (fromIndependent)
			return mixed(
				statistic,
				half,
				'A serial correlation that vanishes is the edge of its space: half chi-squared with one degree of freedom, half zero.'
			);
		if (toNoise && a.errors.along === b.errors.along)
			return mixed(
				statistic,
				half,
				'A noise variance of zero is the edge of its space: half chi-squared with one degree of freedom, half zero.'
			);
		return none(
			statistic,
			'More than one parameter differs at an edge; use the parametric bootstrap.'
		);
	}
	const nested =
		(a.errors.structure === b.errors.structure ||
			inside[b.errors.structure].includes(a.errors.structure)) &&
		(a.errors.varianceBy === 'none' ||
			a.errors.varianceBy === b.errors.varianceBy ||
			(a.errors.varianceBy === 'visit' && b.errors.structure === 'unstructured')) &&
		!(
			a.errors.structure === 'serial' &&
			a.errors.along === 'time' &&
			b.errors.structure !== 'serial'
		);
	const df = larger.parameters.length - smaller.parameters.length;
	if (!nested || df < 1)
		return none(
			statistic,
			'The first model does not lie within the second; use the parametric bootstrap.'
		);
	const mixture = new Array<number>(df + 1).fill(0);
	mixture[df] = 1;
	return mixed(
		statistic,
		mixture,
		`The ${df === 1 ? 'parameter lies' : `${df} parameters lie`} inside ${df === 1 ? 'its' : 'their'} space: chi-squared with ${df} ${df === 1 ? 'degree' : 'degrees'} of freedom.`
	);
}
