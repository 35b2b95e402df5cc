import { normalAbove, normalUpperQuantile } from '../numeric/distribution-normal.js';
import type { SpendingRule } from './types.js';

/**
 * The part of `level` (one side's error) that may be spent by information fraction `t`; 0 at 0, `level` from 1 on.
 *
 * - `spending-obrien-fleming`: 2 (1 − Φ(z / √t)) with z the upper level/2 quantile;
 * - `spending-pocock`: level × log(1 + (e − 1) t);
 * - `spending-power`: level × t^ρ, ρ > 0;
 * - `spending-gamma`: level × (1 − e^(−γt)) / (1 − e^(−γ)), any γ; level × t at γ = 0.
 *
 * Source: Lan & DeMets (1983), Biometrika 70:659-663; Kim & DeMets (1987), Biometrika 74:149-154;
 * Hwang, Shih & DeCani (1990), Statistics in Medicine 9:1439-1445.
 */
export function spentBy(rule: SpendingRule, level: number, t: number): number {
	if (!(t > 0)) return 0;
	if (t >= 1) return level;
	const parameter = rule.parameter ?? 0;
	switch (rule.kind) {
		case 'spending-obrien-fleming':
			return 2 * normalAbove(normalUpperQuantile(level / 2) / Math.sqrt(t));
		case 'spending-pocock':
			return level * Math.log1p((Math.E - 1) * t);
		case 'spending-power':
			return level * t ** parameter;
		case 'spending-gamma':
			return parameter === 0
				? level * t
				: level * (Math.expm1(-parameter * t) / Math.expm1(-parameter));
	}
}
