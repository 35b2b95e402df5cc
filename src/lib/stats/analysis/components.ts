import type { ModelFit } from '../fit/fit-model.js';
import type { Component } from './result.js';

const plain = (name: string, estimate: number): Component => ({
	name,
	estimate,
	lower: null,
	upper: null
});

/** The parameters of the covariance as they are read: the range in the time unit instead of φ = exp(−1/range). */
export function componentsOf(fit: ModelFit): Component[] {
	const { layout } = fit.prepared;
	return fit.parameters.map(({ name, value }) =>
		name === 'range'
			? plain(name, layout.gapUnit * Math.exp(fit.working[layout.range]!))
			: plain(name, value)
	);
}

/** What makes up the variance of one outcome at time 0, beside the subject's level. */
const besides = ['visit', 'serial', 'noise', 'residual'];

/**
 * Level variance ÷ all of the variance of an outcome at time 0; null without a level, and when the errors have a variance for
 * each visit or group, where there is no one share.
 */
export function iccOf(fit: ModelFit): Component | null {
	const level = fit.parameters.find((p) => p.name === 'subject level')?.value;
	if (level === undefined || fit.dependence.errors.varianceBy !== 'none') return null;
	const rest = fit.parameters
		.filter((p) => besides.includes(p.name))
		.reduce((sum, p) => sum + p.value, 0);
	return plain('icc', level / (level + rest));
}
