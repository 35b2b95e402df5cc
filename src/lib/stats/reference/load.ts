import { readFileSync } from 'node:fs';
import type { GrowthRow, GrowthSpec } from '../types.js';

/** For tests only: the data sets and expected values described in README.md. */

export interface ExpectedDf {
	df: number;
	t: number;
	p: number;
	ci_lower: number;
	ci_upper: number;
	/** Kenward–Roger only. */
	se?: number;
}

export interface ExpectedTest {
	estimate: number;
	se: number;
	satterthwaite: ExpectedDf;
	kr?: ExpectedDf;
	L?: number[];
}

export interface ExpectedFit {
	coef_names: string[];
	beta: Record<string, number>;
	se: Record<string, number>;
	vcov_beta: number[][];
	kr_vcov_beta?: number[][];
	varcomp: { tau2_intercept?: number; sigma2: number };
	cov_varcomp_observed_information: number[][];
	derived?: { icc_subject: number };
	logLik: number;
	minus2logLik: number;
	n_parameters: number;
	AIC: number;
	BIC_n_obs: number;
	BIC_n_obs_minus_p: number;
	BIC_n_subjects: number;
	coef_tests: Record<string, ExpectedTest>;
	contrasts: Record<string, ExpectedTest & { L: number[] }>;
	lmerTest_satterthwaite?: Record<string, { df: number; t: number; p: number }>;
	pbkrtest?: {
		vcov_adj: number[][];
		coef: Record<string, { se: number; df: number; p: number }>;
	};
	marginal_fitted?: number[];
	marginal_residuals?: number[];
	conditional_residuals?: number[];
	blups?: {
		subject: string;
		blup: [number];
		conditional_se: [number];
		prediction_se: [number];
	}[];
}

export interface ExpectedValues {
	fits: Record<'M0.REML' | 'M0.ML' | 'M1.REML' | 'M1.ML', ExpectedFit>;
	profile_ci_95_ML_M1: Record<string, { lower: number; upper: number }>;
}

export type DataSet = 'orthodont' | 'sleepstudy' | 'btheb';

const read = (file: string) => readFileSync(new URL(file, import.meta.url), 'utf8');

export function expectedValues(name: DataSet): ExpectedValues {
	return JSON.parse(read(`./${name}.json`)) as ExpectedValues;
}

export function referenceRows(name: DataSet): GrowthRow[] {
	const [header = '', ...lines] = read(`./${name}.csv`).trim().split('\n');
	const columns = header.split(',');
	return lines.map((line) => {
		const cells = line.split(',');
		const cell = (column: string) => cells[columns.indexOf(column)];
		return {
			subject: cell('subject')!,
			time: Number(cell('time')),
			outcome: Number(cell('y')),
			group: cell('arm') ?? null,
			covariates: { baseline: Number(cell('baseline')) }
		};
	});
}

export const referenceSpecs: Record<DataSet, GrowthSpec> = {
	orthodont: { group: { levels: ['0', '1'] } },
	sleepstudy: {},
	btheb: {
		group: { levels: ['0', '1'] },
		covariates: [{ name: 'baseline', kind: 'numeric' }]
	}
};

/** Our name of a coefficient the sources call `name`. */
export function ourName(name: string): string {
	const names: Record<string, string> = {
		'(Intercept)': 'intercept',
		arm: 'group[1]',
		'time:arm': 'time:group[1]'
	};
	return names[name] ?? name;
}
