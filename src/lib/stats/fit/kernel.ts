import type { Moments } from './profile.js';

/**
 * The moments of one kind of dependence and their slopes; the slower the data are to pass, the more it keeps.
 *
 * `backward` belongs to the last `forward` and is given h = ∂ deviance / ∂ m; it adds to `slope` (in working
 * parameters) the derivative of log|V*| + Σ h ∘ m.
 */
export interface Kernel {
	forward(x: Float64Array): Moments | null;
	backward(x: Float64Array, h: Float64Array, slope: Float64Array): void;
}
