import type { FitMethod } from '../plan.js';
import type { PreparedModel } from './prepare-model.js';
import { profileOf, type Profile } from './profile.js';

/** The profile at the working parameters `x`; null where the covariance is not positive definite. */
export function profileAt(
	prepared: PreparedModel,
	method: FitMethod,
	x: Float64Array,
	fixedScale?: number
): Profile | null {
	for (const v of x) if (!Number.isFinite(v)) return null;
	const moments = prepared.kernel.forward(x);
	if (!moments) return null;
	const at = prepared.layout.visit;
	return profileOf(moments, prepared.sizes, method, at < 0 ? 0 : x[at]! ** 2, fixedScale);
}

/** −2 log-likelihood and its analytic slope in the working parameters. */
export function objective(prepared: PreparedModel, method: FitMethod) {
	return (x: Float64Array): { value: number; slope: Float64Array } | null => {
		const profile = profileAt(prepared, method, x);
		if (!profile) return null;
		const slope = new Float64Array(x.length);
		prepared.kernel.backward(x, profile.slope, slope);
		const at = prepared.layout.visit;
		if (at >= 0) slope[at] = 2 * x[at]! * profile.visitSlope;
		return { value: profile.deviance, slope };
	};
}

/**
 * −2 log-likelihood with σ² as one more coordinate, last and in logarithm: nothing but the coefficients and visit
 * effects is profiled out.
 */
export function objectiveWithScale(prepared: PreparedModel, method: FitMethod) {
	return (x: Float64Array): { value: number; slope: Float64Array } | null => {
		const own = x.subarray(0, x.length - 1);
		const scale = Math.exp(x[x.length - 1]!);
		const profile = profileAt(prepared, method, own, scale);
		if (!profile) return null;
		const slope = new Float64Array(x.length);
		prepared.kernel.backward(own, profile.slope, slope);
		const at = prepared.layout.visit;
		if (at >= 0) slope[at] = 2 * x[at]! * profile.visitSlope;
		slope[x.length - 1] = profile.scaleSlope;
		return { value: profile.deviance, slope };
	};
}
