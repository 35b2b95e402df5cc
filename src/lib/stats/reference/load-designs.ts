import { readFileSync } from 'node:fs';

/** For tests only: the group-sequential designs and sample sizes described in README.md. */

export interface ExpectedDesign {
	id: string;
	type_code: 'P' | 'OF' | 'WT' | 'asOF' | 'asP' | 'asKD' | 'asHSD';
	information_fractions: number[];
	alpha: number;
	sided: 1 | 2;
	beta: number;
	spending_parameter: number | null;
	wang_tsiatis_delta: number | null;
	critical_z: number[];
	nominal_p_one_sided: number[];
	cumulative_alpha_spent_total: number[];
	efficacy_only: {
		drift_for_power: number;
		fixed_design_drift: number;
		inflation_factor: number;
		cumulative_power: number[];
		expected_information_fraction_H1: number;
		expected_information_fraction_H0: number;
		expected_relative_to_fixed_H1: number;
		expected_relative_to_fixed_H0: number;
	};
	rpact_characteristics: {
		inflation_factor: number;
		average_sample_number_H1_ratio: number;
		average_sample_number_H0_ratio: number;
	};
	futility?: {
		rule: string;
		futility_z: number[];
		drift_at_design_alternative: number;
		cumulative_beta_spent: number[];
		probability_stop_futility_H0: number[];
		type_I_error_if_futility_is_obeyed: number;
	};
	published?: Record<string, { values: number | number[]; source: string }>;
}

export interface ExpectedInterim {
	design: string;
	look: number;
	z: number;
	drift_design: number;
	drift_current_trend: number;
	conditional_power_final_look_only: Record<'design' | 'current_trend' | 'null', number>;
	conditional_power_any_remaining_look: Record<'design' | 'current_trend' | 'null', number>;
	predictive_power_flat_prior_final_look_only: number;
	predictive_power_flat_prior_any_remaining_look: number;
}

export interface ExpectedFinal {
	design: string;
	stop_look?: number;
	look?: number;
	z: number;
	p_value_one_sided_stagewise: number;
	drift_median_unbiased: number;
	drift_ci_lower: number;
	drift_ci_upper: number;
	drift_repeated_ci?: [number, number];
}

export interface ExpectedMonitoring {
	designs: Record<string, ExpectedDesign>;
	interim: ExpectedInterim[];
	final_analysis: ExpectedFinal[];
}

export interface ExpectedSampleSizes {
	slopes: {
		id: string;
		times: number[];
		sigma2: number;
		tau2_intercept: number;
		tau2_slope: number;
		cov_intercept_slope: number;
		slope_difference: number;
		alpha_two_sided: number;
		power: number;
		fraction_arm1: number;
		variance_of_one_subject_slope: number;
		n_total_unrounded: number;
		n_arm1: number;
		n_arm0: number;
		per_group_unrounded: number | null;
	}[];
	mean_difference: {
		n_visits: number;
		icc: number;
		variance_inflation: number;
		effective_sample_size_for_100_subjects: number;
		sigma2_total: number;
		delta: number;
		power: number;
		n_per_group_unrounded: number;
	};
}

const read = (file: string) => JSON.parse(readFileSync(new URL(file, import.meta.url), 'utf8'));

export const expectedMonitoring = () => read('./group_sequential.json') as ExpectedMonitoring;
export const expectedSampleSizes = () => read('./design_sample_size.json') as ExpectedSampleSizes;
