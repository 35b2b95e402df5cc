import { naturalModel } from '../dependence/natural.js';
import type { ModelFit } from '../fit/fit-model.js';

/** A variance component or another parameter of the covariance, as it is reported. */
export interface Component {
	/** In our words; `range` in time units rather than φ. */
	name: string;
	/** On the data's own scale; null where it is without end or means nothing at this edge. */
	estimate: number | null;
	/** Of which kind: sets how a limit is searched for. */
	kind: 'variance' | 'covariance' | 'correlation' | 'positive' | 'share';
	/** Whether it stands at the edge of its space. */
	atEdge: boolean;
}

function kindOf(name: string): Component['kind'] {
	if (name === 'range') return 'positive';
	if (name === 'noise share' || name === 'ICC') return 'share';
	if (name.includes('correlation') || name === 'rho') return 'correlation';
	return name.includes('covariance') ? 'covariance' : 'variance';
}

/** Sum of the variances that are one number for every row; NaN where variances differ by class. */
function totalVariance(values: Map<string, number>): number {
	let total = 0;
	for (const [name, value] of values) {
		if (name.startsWith('variance[')) return NaN;
		if (
			['subject level', 'visit', 'residual', 'serial', 'noise', 'variance', 'covariance'].includes(
				name
			)
		)
			total += value;
	}
	return total;
}

/**
 * Every reported number of the covariance by name at working parameters `x` and scale σ²; NaN where it has no
 * meaning: range −1/log φ, the level–slope correlation, and the ICC besides the parameters themselves.
 */
export function reportedValues(fit: ModelFit, x: Float64Array, scale: number): Map<string, number> {
	const { design, layout } = fit.prepared;
	const natural = naturalModel(design, layout, x, scale, []);
	const values = new Map(natural.parameters.map((p) => [p.name, p.value]));
	const icc = intraclass(values);
	if (values.has('range')) values.set('range', layout.gapUnit * Math.exp(x[layout.range]!));
	const covariance = values.get('level–slope covariance');
	if (covariance !== undefined)
		values.set(
			'level–slope correlation',
			covariance / Math.sqrt(values.get('subject level')! * values.get('subject slope')!)
		);
	if (Number.isFinite(icc)) values.set('ICC', icc);
	return values;
}

function intraclass(values: Map<string, number>): number {
	const shared = values.get('subject level') ?? values.get('covariance');
	return shared === undefined ? NaN : shared / totalVariance(values);
}

/**
 * The variance components of a fit, its range or ρ, and the ICC where the model has one.
 *
 * ICC: variance of the subjects' level (or the common covariance) ÷ the sum of all variance components of a row, with
 * slopes at time 0; none where variances differ by visit or group. Unitless.
 */
export function componentsOf(fit: ModelFit): Component[] {
	const values = reportedValues(fit, Float64Array.from(fit.working), fit.scale);
	const inactive = new Set(fit.natural.parameters.flatMap((p) => (p.active ? [] : [p.name])));
	return [...values].map(([name, value]): Component => {
		const atEdge =
			inactive.has(name) || (name === 'level–slope correlation' && fit.boundary.includes(name));
		const vanished = fit.boundary.includes('range') || fit.boundary.includes('serial');
		const endless = fit.boundary.includes('range without end');
		const meaningless =
			(name === 'range' && (vanished || endless)) ||
			(name === 'rho' && fit.boundary.includes('serial'));
		return {
			name,
			estimate: meaningless || !Number.isFinite(value) ? null : value,
			kind: kindOf(name),
			atEdge
		};
	});
}

/** Variance of subject levels ÷ the variance of a row, at time 0; null where the model has no such number. */
export function intraclassCorrelationOf(fit: ModelFit): number | null {
	return reportedValues(fit, Float64Array.from(fit.working), fit.scale).get('ICC') ?? null;
}
