import { StatsError } from '../errors.js';
import type { ModelFit } from '../fit/fit-model.js';
import { objectiveWithScale } from '../fit/objective-of.js';
import { chiSquareQuantile } from '../numeric/distribution.js';
import { descend } from '../numeric/quasi-newton.js';
import type { Supervision } from '../types.js';
import { componentsOf, reportedValues, type Component } from './components.js';

export interface ComponentInterval extends Component {
	/** 0 (or −1) when the likelihood does not fall enough on the way there; null when it has no meaning. */
	lower: number | null;
	/** null when no limit is found: the data bound the component from one side only. */
	upper: number | null;
}

/** In which the likelihood is closer to a parabola, and back. */
const scales: Record<
	Component['kind'],
	{ to: (v: number) => number; from: (u: number) => number }
> = {
	variance: { to: Math.log, from: Math.exp },
	positive: { to: Math.log, from: Math.exp },
	covariance: { to: (v) => v, from: (u) => u },
	correlation: { to: Math.atanh, from: Math.tanh },
	share: { to: (v) => Math.log(v / (1 - v)), from: (u) => 1 / (1 + Math.exp(-u)) }
};

/** The lowest −2 log-likelihood with one reported number held, warm from the last such point. */
function constrained(
	fit: ModelFit,
	name: string,
	kind: Component['kind'],
	supervision: Supervision
) {
	const f = objectiveWithScale(fit.prepared, fit.method);
	const k = fit.working.length;
	const start = Float64Array.of(...fit.working, Math.log(fit.scale));
	const value = (x: Float64Array) =>
		reportedValues(fit, x.subarray(0, k), Math.exp(x[k]!)).get(name) ?? NaN;
	const slopeOf = (x: Float64Array) => {
		const slope = new Float64Array(k + 1);
		for (let i = 0; i <= k; i++) {
			const h = 1e-5 * (1 + Math.abs(x[i]!));
			const moved = x.slice();
			moved[i] = x[i]! + h;
			const up = value(moved);
			moved[i] = x[i]! - h;
			slope[i] = (up - value(moved)) / (2 * h);
		}
		return slope;
	};
	// σ² gives way for a variance, otherwise the coordinate that moves the number most.
	const at = slopeOf(start);
	let given = k;
	if (kind !== 'variance') {
		given = 0;
		for (let i = 1; i < k; i++) if (Math.abs(at[i]!) > Math.abs(at[given]!)) given = i;
	}
	const own = fit.prepared.layout;
	const zeroAt =
		name === 'subject level'
			? own.subject
			: name === 'subject slope'
				? own.subject + own.q - 1
				: name === 'visit'
					? own.visit
					: -1;
	const free = Array.from({ length: k + 1 }, (_, i) => i).filter((i) => i !== given);

	/** Moves the coordinate that gives way until the number is `target`. */
	const settle = (x: Float64Array, target: number): boolean => {
		if (given === k) {
			const now = value(x);
			if (!(now > 0)) return false;
			x[k]! += Math.log(target / now);
			return true;
		}
		for (let step = 0; step < 60; step++) {
			const now = value(x);
			if (!Number.isFinite(now)) return false;
			if (Math.abs(now - target) <= 1e-11 * (1e-3 + Math.abs(target))) return true;
			const h = 1e-5 * (1 + Math.abs(x[given]!));
			const moved = x.slice();
			moved[given]! += h;
			const slope = (value(moved) - now) / h;
			const change = (target - now) / slope;
			if (!Number.isFinite(change)) return false;
			x[given]! += Math.max(-0.7, Math.min(0.7, change));
		}
		return false;
	};
	let warm = start;
	return (target: number): number | null => {
		if (supervision.shouldStop?.()) throw new StatsError('stopped', 'The intervals were stopped.');
		const expand = (part: Float64Array) => {
			const x = warm.slice();
			free.forEach((i, j) => (x[i] = part[j]!));
			return x;
		};
		// A component at zero has to leave it before it can be held anywhere else.
		if (zeroAt >= 0 && Math.abs(warm[zeroAt]!) < 1e-3) {
			warm = warm.slice();
			warm[zeroAt] = Math.sqrt(Math.max(1e-6, Math.min(1, target / fit.scale)));
		}
		const found = descend(
			(part) => {
				const x = expand(part);
				if (!settle(x, target)) return null;
				const here = f(x);
				if (!here) return null;
				const g = slopeOf(x);
				const rate = here.slope[given]! / g[given]!;
				return {
					value: here.value,
					slope: Float64Array.from(free, (i) => here.slope[i]! - rate * g[i]!)
				};
			},
			Float64Array.from(free, (i) => warm[i]!),
			{ tolerance: 1e-4, most: 120, longest: 1 }
		);
		if (!found) return null;
		const x = expand(found.x);
		if (settle(x, target)) warm = x;
		return found.value;
	};
}

/** Where the profile has risen by `rise` on one side of the estimate; null when it does not. */
function limit(
	profile: (v: number) => number | null,
	{ to, from }: { to: (v: number) => number; from: (u: number) => number },
	estimate: number,
	direction: 1 | -1,
	rise: number,
	lowest: number,
	firstStep: number
): number | null {
	const root = Math.sqrt(rise);
	const origin = to(estimate);
	let near = { u: origin, r: 0 };
	let far: { u: number; r: number } | null = null;
	let step = firstStep;
	for (let tries = 0; tries < 60; tries++) {
		let u: number;
		if (!far) u = near.u + direction * step;
		else {
			// √rise is nearly a straight line.
			const share = (root - near.r) / (far.r - near.r);
			u = near.u + Math.min(0.9, Math.max(0.1, share)) * (far.u - near.u);
		}
		const value = profile(from(u));
		if (value === null) {
			if (far) return null;
			step /= 2;
			if (step < 1e-6) return null;
			continue;
		}
		const r = Math.sqrt(Math.max(0, value - lowest));
		if (Math.abs(r - root) < 1e-6 * root) return from(u);
		if (r < root) {
			if (!far) {
				const slope = (r - near.r) / Math.abs(u - near.u);
				// Flat: nothing more is lost however far one goes.
				if (Math.abs(u - origin) > 40) return null;
				step =
					slope > 0 ? Math.min(3 * step, Math.max(step, (1.1 * (root - r)) / slope)) : 2 * step;
			}
			near = { u, r };
		} else far = { u, r };
		if (far && Math.abs(far.u - near.u) < 1e-9 * (1 + Math.abs(far.u))) return from(far.u);
	}
	return far ? from((near.u + far.u) / 2) : null;
}

/**
 * Profile-likelihood intervals of the components of a fit, all others at their best for each value tried.
 *
 * −2 log-likelihood (restricted under REML) rises by the chi-squared quantile on one degree of freedom at each limit,
 * also where the lower limit is zero: there the interval is wider than need be.
 * Errors: `bad-option`, `stopped`. Source: Venzon & Moolgavkar (1988), Applied Statistics 37:87-94.
 */
export function componentIntervals(
	fit: ModelFit,
	confidence = 0.95,
	supervision: Supervision = {}
): ComponentInterval[] {
	if (!(confidence > 0 && confidence < 1)) {
		throw new StatsError('bad-option', 'A confidence lies between 0 and 1.', { confidence });
	}
	const rise = chiSquareQuantile(confidence, 1);
	const lowest = -2 * fit.logLikelihood;
	const components = componentsOf(fit);
	return components.map((component, at) => {
		supervision.onProgress?.(at / components.length);
		const { name, estimate, kind } = component;
		if (estimate === null) return { ...component, lower: null, upper: null };
		const scale = scales[kind];
		const zero = (kind === 'variance' || kind === 'share') && estimate <= 0;
		const edgeOfCorrelation = kind === 'correlation' && Math.abs(estimate) > 1 - 1e-9;
		if (edgeOfCorrelation) {
			const bound = Math.sign(estimate);
			return { ...component, lower: bound < 0 ? -1 : null, upper: bound > 0 ? 1 : null };
		}
		const size = fit.natural.parameters.reduce(
			(sum, p) =>
				sum + (p.name.startsWith('subject slope') || p.unit === 'none' ? 0 : Math.abs(p.value)),
			0
		);
		const from = zero ? (kind === 'share' ? 1e-4 : 1e-4 * size) : estimate;
		const first = kind === 'covariance' ? 0.2 * size : 0.3;
		const find = (direction: 1 | -1) =>
			limit(constrained(fit, name, kind, supervision), scale, from, direction, rise, lowest, first);
		// Farther out than any data can tell from infinity.
		const endless =
			kind === 'positive'
				? 1e6 * fit.prepared.layout.longestSpan
				: kind === 'variance' && !name.startsWith('subject slope')
					? 1e8 * size
					: Infinity;
		const found = find(1);
		const floor = kind === 'correlation' ? -1 : kind === 'covariance' ? null : 0;
		const ceiling = kind === 'correlation' || kind === 'share' ? 1 : null;
		return {
			...component,
			lower: zero ? 0 : (find(-1) ?? floor),
			upper: found !== null && found < endless ? found : ceiling
		};
	});
}
