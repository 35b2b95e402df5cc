import type { ModelFit } from '../fit/fit-model.js';
import { covarianceFrom, curvatureAt } from './fit-curvature.js';

/**
 * Covariance of the estimated parameters of the covariance, from the observed information; on the data's own scale,
 * φ = exp(−1/range) where the name is `range`. Errors: `singular-information`.
 */
export function parameterCovariance(fit: ModelFit): { names: string[]; covariance: number[][] } {
	const { names, observed, sums } = curvatureAt(fit);
	const { count } = sums;
	const inner = covarianceFrom(observed, count);
	const { timeOrigin: t0, timeUnit: u } = fit.prepared.layout;
	const { natural } = fit;
	const two = fit.prepared.layout.q === 2;
	const at = (name: string) => names.indexOf(name);
	// Rows: ∂ (as reported) / ∂ (as differentiated).
	const jacobian = names.map((name, k) => {
		const row = new Float64Array(count);
		const parameter = natural.parameters.find((p) => p.name === name)!;
		const unit = parameter.unit === 'square' ? fit.scale : 1;
		const [level, both, slope] = [
			at('subject level'),
			at('level–slope covariance'),
			at('subject slope')
		];
		if (name === 'subject slope') row[k] = unit / u ** 2;
		else if (name === 'level–slope covariance') {
			row[k] = unit / u;
			if (slope >= 0) row[slope] = (-unit * t0) / u ** 2;
		} else if (name === 'subject level' && two && level === k) {
			row[k] = unit;
			if (both >= 0) row[both] = (-2 * unit * t0) / u;
			if (slope >= 0) row[slope] = (unit * t0 * t0) / u ** 2;
		} else row[k] = unit;
		return row;
	});
	const covariance = jacobian.map((a) =>
		jacobian.map((b) => {
			let sum = 0;
			for (let k = 0; k < count; k++)
				for (let l = 0; l < count; l++)
					if (a[k] !== 0 && b[l] !== 0) sum += a[k]! * inner[k * count + l]! * b[l]!;
			return sum;
		})
	);
	return { names, covariance };
}
