import { describe, expect, test } from 'vitest';
import {
	normalAbove,
	normalBelow,
	normalUpperQuantile,
	studentAbove
} from '../numeric/distribution.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { expectedMonitoring } from '../reference/load-designs.js';
import { planOf } from '../reference/monitoring-plans.js';
import { boundariesOf, designMonitoring } from './boundaries.js';
import { normalEquivalent } from './compare.js';
import {
	conditionalPower,
	conditionalPowerFinalOnly,
	predictivePower,
	predictivePowerFinalOnly,
	trendOf
} from './conditional-power.js';
import { monitor } from './monitor.js';
import {
	repeatedInterval,
	stagewiseAnalysis,
	stagewiseProbability,
	withOverrun
} from './stagewise.js';

const { designs, interim, final_analysis } = expectedMonitoring();
const designOf = (id: string) => designMonitoring(planOf(designs[id]!));

describe.each(interim)('$design at look $look with z $z', (expected) => {
	const design = designOf(expected.design);
	const { fractions, upper } = boundariesOf(design, 'ignored');
	const seen = {
		fraction: fractions[expected.look - 1]!,
		z: expected.z,
		remaining: fractions.slice(expected.look),
		remainingZ: upper.slice(expected.look)
	};

	test('conditional and predictive power, functions', () => {
		const drifts = {
			design: expected.drift_design,
			current_trend: trendOf(seen),
			null: 0
		};
		expectWithin(drifts.current_trend, expected.drift_current_trend, 1e-12);
		for (const key of ['design', 'current_trend', 'null'] as const) {
			const any = expected.conditional_power_any_remaining_look[key];
			const last = expected.conditional_power_final_look_only[key];
			expectWithin(conditionalPower(seen, drifts[key]), any, 1e-7, key);
			expectWithin(conditionalPowerFinalOnly(seen, drifts[key]), last, 1e-7, key);
		}
		const any = expected.predictive_power_flat_prior_any_remaining_look;
		expectWithin(predictivePower(seen), any, 1e-7);
		const last = expected.predictive_power_flat_prior_final_look_only;
		expectWithin(predictivePowerFinalOnly(seen), last, 1e-7);
	});

	test('the same in one result', () => {
		const result = monitor({
			...planOf(designs[expected.design]!),
			observed: { look: expected.look, z: expected.z },
			confidence: 0.95
		});
		const any = expected.conditional_power_any_remaining_look;
		expectWithin(result.conditionalPower!.design, any.design, 1e-7);
		expectWithin(result.conditionalPower!.trend, any.current_trend, 1e-7);
		expectWithin(result.conditionalPower!.none, any.null, 1e-7);
		expect(result.conditionalPower!.designInflated).toBeGreaterThan(any.design);
		expectWithin(
			result.conditionalPowerFinalOnly!.none,
			expected.conditional_power_final_look_only.null,
			1e-7
		);
		expect(result.observed!.reached).toBe('go-on');
		expect(JSON.parse(JSON.stringify(result))).toEqual(result);
	});
});

test('predictive power is conditional power averaged over what the drift may be', () => {
	const design = designOf('ld_obf_k5_two_sided');
	const { fractions, upper } = boundariesOf(design, 'ignored');
	const seen = { fraction: 0.4, z: 1.7, remaining: fractions.slice(2), remainingZ: upper.slice(2) };
	const sd = 1 / Math.sqrt(seen.fraction);
	let [sum, weights] = [0, 0];
	for (let u = -8; u <= 8; u += 0.05) {
		const weight = Math.exp((-u * u) / 2);
		sum += weight * conditionalPower(seen, trendOf(seen) + u * sd);
		weights += weight;
	}
	expectWithin(predictivePower(seen), sum / weights, 1e-9);
});

describe.each(final_analysis.filter((f) => f.stop_look))(
	'$design stopped at look $stop_look with z $z',
	(expected) => {
		const design = designOf(expected.design);
		const { fractions, upper } = boundariesOf(design, 'ignored');
		const look = expected.stop_look!;
		const stopped = {
			fractions: fractions.slice(0, look),
			upperBefore: upper.slice(0, look - 1),
			sides: design.plan.sides,
			z: expected.z
		};

		test('p, median-unbiased drift and interval', () => {
			const found = stagewiseAnalysis(stopped);
			expectWithin(found.p, expected.p_value_one_sided_stagewise, 1e-7);
			expectWithin(found.medianUnbiasedDrift, expected.drift_median_unbiased, 1e-6);
			expectWithin(found.driftInterval[0], expected.drift_ci_lower, 1e-6);
			expectWithin(found.driftInterval[1], expected.drift_ci_upper, 1e-6);
		});

		test('the limits are where the result has the probabilities they promise', () => {
			const { driftInterval, medianUnbiasedDrift } = stagewiseAnalysis(stopped, 0.9);
			expectWithin(stagewiseProbability(stopped, driftInterval[0]), 0.05, 1e-9);
			expectWithin(stagewiseProbability(stopped, driftInterval[1]), 0.95, 1e-9);
			expectWithin(stagewiseProbability(stopped, medianUnbiasedDrift), 0.5, 1e-9);
		});
	}
);

test('repeated interval of the reference, and none where nothing can be reached', () => {
	const expected = final_analysis.find((f) => f.drift_repeated_ci)!;
	const design = designOf(expected.design);
	const { fraction, efficacyZ } = design.looks[expected.look! - 1]!;
	const found = repeatedInterval(expected.z, fraction, efficacyZ)!;
	found.forEach((limit, i) => expectWithin(limit, expected.drift_repeated_ci![i]!, 1e-6));
	expect(repeatedInterval(1, 0.1, null)).toBeNull();
});

test('a trial stopped exactly on its last boundary has p = α; one at its first look the plain p', () => {
	const design = designOf('ld_obf_k3_one_sided');
	const { fractions, upper } = boundariesOf(design, 'ignored');
	const end = { fractions, upperBefore: upper.slice(0, 2), sides: 1 as const, z: upper[2]! };
	expectWithin(stagewiseAnalysis(end).p, 0.025, 1e-10);
	const first = { fractions: [0.3], upperBefore: [], sides: 2 as const, z: 4 };
	expectRelative(stagewiseAnalysis(first).p, normalAbove(4), 1e-10);
	expectWithin(stagewiseAnalysis(first).medianUnbiasedDrift, 4 / Math.sqrt(0.3), 1e-9);
});

test('overrun: the look that stopped is taken out and the fuller analysis put in', () => {
	const stopped = { fractions: [0.3, 0.6], upperBefore: [3.9], sides: 1 as const, z: 2.9 };
	const later = withOverrun(stopped, 0.68, 2.7);
	expect(later).toEqual({ ...stopped, fractions: [0.3, 0.68], z: 2.7 });
	expect(stagewiseAnalysis(later).p).toBeGreaterThan(normalAbove(2.7));
	expect(() => withOverrun(stopped, 0.5, 2.7)).toThrow(/only grows/);
});

test('a t is compared by the z with the same p, in both tails', () => {
	const { z, pOneSided } = normalEquivalent({ t: 2.5, df: 12 });
	expect(pOneSided).toBe(studentAbove(2.5, 12));
	expectRelative(normalAbove(z), pOneSided, 1e-13);
	expect(z).toBeLessThan(2.5);
	expect(normalEquivalent({ t: -2.5, df: 12 }).z).toBe(-z);
	expectRelative(normalEquivalent({ t: 9, df: Infinity }).z, 9, 1e-13);
	expect(normalEquivalent({ t: 1e9, df: 60 }).z).toBeCloseTo(normalUpperQuantile(1e-300), 6);
	expect(() => normalEquivalent({ t: NaN, df: 5 })).toThrow(/finite t/);
	expectWithin(normalBelow(normalEquivalent({ t: 0, df: 3 }).z), 0.5, 1e-15);
});

test('what cannot be asked is refused', () => {
	const seen = { fraction: 0.5, z: 99, remaining: [1], remainingZ: [2] };
	expect(() => conditionalPower(seen, 0)).toThrow(/between/);
	expect(() => conditionalPower({ ...seen, z: 1, remaining: [] }, 0)).toThrow(/at least one look/);
	const stopped = { fractions: [0.5, 1], upperBefore: [], sides: 1 as const, z: 2 };
	expect(() => stagewiseAnalysis(stopped)).toThrow(/each look before/);
	expect(() => stagewiseAnalysis({ ...stopped, upperBefore: [3] }, 1)).toThrow(/Confidence/);
});
