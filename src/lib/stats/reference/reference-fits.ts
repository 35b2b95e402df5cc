import { readFileSync } from 'node:fs';
import type { Dependence, ErrorStructure, SubjectEffects } from '../plan.js';
import type { ReferenceSet } from './reference-design.js';

/** For tests only: the fits of `fits-*.json`, described in README.md. */

export interface ReferenceTest {
	estimate: number;
	se: number;
	L?: number[];
	satterthwaite?: { df: number; p: number; ci_lower: number; ci_upper: number };
	kr?: { se: number; df: number; p: number; ci_lower: number; ci_upper: number };
}

export interface ReferenceFit {
	converged: boolean;
	singular: boolean;
	coef_names: string[];
	beta: Record<string, number>;
	se: Record<string, number>;
	vcov_beta: number[][];
	varcomp: Record<string, number>;
	derived?: Record<string, number>;
	logLik: number;
	n_parameters: number;
	AIC: number;
	BIC_n_obs: number;
	BIC_n_obs_minus_p: number;
	BIC_n_subjects: number;
	coef_tests?: Record<string, ReferenceTest>;
	contrasts?: Record<string, ReferenceTest>;
	kr_vcov_beta?: number[][];
	cov_varcomp_observed_information?: number[][];
	joint_tests?: Record<
		string,
		{ L: number[][]; kr: { ddf: number; F_scaling: number; F: number; p: number } }
	>;
	lmerTest_joint?: Record<string, { numDF: number; denDF: number; F: number; p: number }>;
	lmerTest_satterthwaite?: Record<string, { df: number }>;
	pbkrtest?: { coef: Record<string, { se: number; df: number }> };
}

export interface ReferenceFile {
	fits: Record<string, ReferenceFit>;
	likelihood_ratio_tests: {
		null: string;
		alternative: string;
		method: 'REML' | 'ML';
		statistic: number;
		p_mixture: number;
	}[];
	profile_ci_95_ML: Record<string, Record<string, { lower: number; upper: number }>>;
}

export function referenceFits(set: ReferenceSet): ReferenceFile {
	const url = new URL(`./fits-${set}.json`, import.meta.url);
	return JSON.parse(readFileSync(url, 'utf8')) as ReferenceFile;
}

const model = (
	subjectEffects: SubjectEffects,
	structure: ErrorStructure,
	rest: { visitEffects?: boolean; varianceBy?: 'none' | 'visit'; along?: 'time' | 'visit' } = {}
): Dependence => ({
	subjectEffects,
	visitEffects: rest.visitEffects ?? false,
	errors: { structure, along: rest.along ?? 'time', varianceBy: rest.varianceBy ?? 'none' }
});

/** The models of the collection in our words. */
export const referenceModels: Record<string, Dependence> = {
	M0: model('none', 'independent'),
	M1: model('level', 'independent'),
	M2: model('level-and-slope', 'independent'),
	M2d: model('level-and-slope-uncorrelated', 'independent'),
	M3: model('none', 'serial'),
	M3n: model('none', 'serial-with-noise'),
	M4: model('level', 'serial'),
	M4n: model('level', 'serial-with-noise'),
	M5: model('level', 'independent', { visitEffects: true }),
	M6: model('level-and-slope', 'independent', { visitEffects: true }),
	M7_cat: model('none', 'unstructured'),
	M8cs_cat: model('none', 'compound-symmetry'),
	M8csh_cat: model('none', 'compound-symmetry', { varianceBy: 'visit' }),
	M8ar1h_cat: model('none', 'serial', { varianceBy: 'visit', along: 'visit' }),
	M8toep_cat: model('none', 'toeplitz'),
	M8toeph_cat: model('none', 'toeplitz', { varianceBy: 'visit' })
};

/** Our name of a covariance parameter the collection calls `theirs` in a model. */
export function parameterName(key: string, theirs: string): string {
	const names: Record<string, string> = {
		tau2_intercept: 'subject level',
		cov_intercept_slope: 'level–slope covariance',
		tau2_slope: 'subject slope',
		sigma2_visit: 'visit',
		sigma2: /^M[34]\./.test(key) ? 'serial' : key.startsWith('M8toep') ? 'variance' : 'residual',
		phi: 'range',
		sigma2_serial: 'serial',
		sigma2_nugget: 'noise',
		sigma2_within: 'residual'
	};
	const variance = /^v(\d+)$/.exec(theirs);
	if (variance) return `variance[visit ${variance[1]}]`;
	const pair = /^v(\d+)_(\d+)$/.exec(theirs);
	if (pair)
		return pair[1] === pair[2]
			? `variance[visit ${pair[1]}]`
			: `covariance[visit ${pair[1]}, visit ${pair[2]}]`;
	const lag = /^rho(\d+)$/.exec(theirs);
	if (lag) return `correlation[lag ${lag[1]}]`;
	return names[theirs] ?? theirs;
}
