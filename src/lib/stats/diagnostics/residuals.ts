import type { ModelFit } from '../fit/fit-model.js';
import { fittedRows, type FittedRows } from '../prediction/conditional-fit.js';
import { inverseCovariance, type InverseCovariance } from '../prediction/inverse-covariance.js';
import { normaliser } from './normalised.js';

/** Residuals of the design's rows, in their order; analysed scale but for the normalised. */
export interface Residuals extends FittedRows {
	/** See `normaliser`; unitless. */
	normalised: Float64Array;
}

/** Marginal, conditional and normalised residuals with the fitted values they belong to. Errors: `singular-information`. */
export function residualsOf(
	fit: ModelFit,
	inverse: InverseCovariance = inverseCovariance(fit)
): Residuals {
	return { ...fittedRows(fit, inverse), normalised: normaliser(fit)(inverse.residual) };
}
