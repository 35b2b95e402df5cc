import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { normalUpperQuantile } from '../numeric/distribution.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { expectedMonitoring } from '../reference/load-designs.js';
import { planOf } from '../reference/monitoring-plans.js';
import { boundariesOf, designMonitoring } from './boundaries.js';
import { stoppingProbabilities } from './crossing.js';
import { operatingCharacteristics } from './operating.js';
import type { EfficacyRule, FutilityRule, MonitoringPlan } from './types.js';

/** Tolerances of the reference: z 1e-6, probabilities 1e-7, inflation 1e-5 relative. */
describe.each(Object.entries(expectedMonitoring().designs))('%s', (_, expected) => {
	const design = designMonitoring(planOf(expected));

	test('boundaries, nominal levels and α spent', () => {
		design.looks.forEach((look, k) => {
			expectWithin(look.efficacyZ!, expected.critical_z[k]!, 1e-6);
			expectWithin(look.nominalPOneSided, expected.nominal_p_one_sided[k]!, 1e-7);
			expectWithin(look.cumulativeAlpha, expected.cumulative_alpha_spent_total[k]!, 1e-7);
		});
	});

	test('drift, inflation, power by look and expected information without futility', () => {
		const alone = designMonitoring({ ...planOf(expected), futility: null });
		const only = expected.efficacy_only;
		expectWithin(alone.drift, only.drift_for_power, 1e-6);
		expectWithin(alone.fixedDrift, only.fixed_design_drift, 1e-9);
		expectRelative(alone.inflationFactor, only.inflation_factor, 1e-5);
		const under = operatingCharacteristics(alone, alone.drift);
		let power = 0;
		under.efficacy.forEach((p, k) => {
			power += p;
			expectWithin(power, only.cumulative_power[k]!, 1e-7);
		});
		const none = operatingCharacteristics(alone, 0);
		expectWithin(under.expectedFraction, only.expected_information_fraction_H1, 1e-7);
		expectWithin(none.expectedFraction, only.expected_information_fraction_H0, 1e-7);
		expectRelative(under.expectedRelativeToFixed, only.expected_relative_to_fixed_H1, 1e-5);
		expectRelative(none.expectedRelativeToFixed, only.expected_relative_to_fixed_H0, 1e-5);
	});

	test('a second program’s inflation and expected information, futility obeyed', () => {
		const other = expected.rpact_characteristics;
		expectRelative(design.inflationFactor, other.inflation_factor, 1e-5);
		const at = (drift: number) => operatingCharacteristics(design, drift).expectedRelativeToFixed;
		expectRelative(at(design.drift), other.average_sample_number_H1_ratio, 1e-5);
		expectRelative(at(0), other.average_sample_number_H0_ratio, 1e-5);
	});

	const published = Object.entries(expected.published ?? {});
	if (published.length > 0)
		test('the printed digits of the handbook (from memory)', () => {
			for (const [what, { values }] of published) {
				const found =
					what === 'inflation'
						? [design.inflationFactor]
						: what === 'final_critical'
							? [design.looks.at(-1)!.efficacyZ!]
							: design.looks.map((look) => look.efficacyZ!);
				[values].flat().forEach((value, k) => expectWithin(found[k]!, value, 5.1e-4, what));
			}
		});

	const futility = expected.futility;
	if (futility)
		test('futility solved with the drift, so that power is exact', () => {
			expectWithin(design.drift, futility.drift_at_design_alternative, 1e-6);
			futility.futility_z.forEach((z, k) => expectWithin(design.looks[k]!.futilityZ!, z, 1e-6));
			expect(design.looks.at(-1)!.futilityZ).toBe(design.looks.at(-1)!.efficacyZ);
			const obeyed = operatingCharacteristics(design, design.drift);
			expectWithin(obeyed.power, 1 - expected.beta, 1e-10);
			let lost = 0;
			obeyed.below.forEach((p, k) => {
				lost += p;
				expectWithin(lost, futility.cumulative_beta_spent[k]!, 1e-7);
			});
			const none = operatingCharacteristics(design, 0);
			let stopped = 0;
			futility.probability_stop_futility_H0.forEach((p, k) => {
				stopped += none.below[k]!;
				expectWithin(stopped, p, 1e-7);
			});
			expectWithin(none.power, futility.type_I_error_if_futility_is_obeyed, 1e-7);
		});
});

/**
 * Jennison & Turnbull (2000), tables 2.1 and 2.3 (two-sided, α = 0.01 and 0.1) and 2.9 (Δ = 0.25), from memory;
 * printed to three decimals.
 */
test.each([
	['pocock', null, 2, 0.1, 1.875],
	['pocock', null, 5, 0.1, 2.122],
	['pocock', null, 5, 0.01, 2.986],
	['pocock', null, 10, 0.05, 2.555],
	['pocock', null, 20, 0.05, 2.672],
	['obrien-fleming', null, 2, 0.05, 1.977],
	['obrien-fleming', null, 4, 0.05, 2.024],
	['obrien-fleming', null, 10, 0.05, 2.087],
	['obrien-fleming', null, 4, 0.01, 2.609],
	['obrien-fleming', null, 5, 0.01, 2.621],
	['wang-tsiatis', 0.25, 2, 0.05, 2.038],
	['wang-tsiatis', 0.25, 5, 0.05, 2.136]
] as const)(
	'%s with parameter %s, %i looks, α %d: last boundary %d',
	(kind, parameter, n, alpha, z) => {
		const design = designMonitoring(equal(n, { kind, parameter }, { alpha, sides: 2 }));
		expectWithin(design.looks.at(-1)!.efficacyZ!, z, 5.1e-4);
	}
);

function equal(
	looks: number,
	efficacy: EfficacyRule,
	more: Partial<MonitoringPlan> = {}
): MonitoringPlan {
	return {
		informationFractions: Array.from({ length: looks }, (_, k) => (k + 1) / looks),
		sides: 1,
		alpha: 0.025,
		power: 0.9,
		efficacy,
		...more
	};
}

test('one look is the ordinary test', () => {
	for (const kind of ['pocock', 'spending-obrien-fleming'] as const) {
		const design = designMonitoring(equal(1, { kind }));
		expectWithin(design.looks[0]!.efficacyZ!, normalUpperQuantile(0.025), 1e-12);
		expectWithin(design.inflationFactor, 1, 1e-10);
	}
});

const rules: EfficacyRule[] = [
	{ kind: 'pocock' },
	{ kind: 'obrien-fleming' },
	{ kind: 'wang-tsiatis', parameter: 0.2 },
	{ kind: 'spending-obrien-fleming' },
	{ kind: 'spending-pocock' },
	{ kind: 'spending-power', parameter: 3 },
	{ kind: 'spending-gamma', parameter: -4 },
	{ kind: 'spending-gamma', parameter: 0 }
];

describe('an answer or a refusal, never NaN, for looks 0.001 apart and α far out', () => {
	const twenty = (from: (k: number) => number) =>
		Array.from({ length: 20 }, (_, k) => (k === 19 ? 1 : from(k)));
	const fractions = {
		early: twenty((k) => (k + 1) / 1000),
		middle: twenty((k) => 0.5 + k / 1000),
		late: twenty((k) => 1 - (19 - k) / 1000)
	};
	test.each(
		Object.entries(fractions).flatMap(([where, informationFractions]) =>
			[1e-6, 0.49].flatMap((alpha) =>
				rules.map((efficacy) => [where, alpha, efficacy, informationFractions] as const)
			)
		)
	)('%s, α %d, %j', (_, alpha, efficacy, informationFractions) => {
		const plan: MonitoringPlan = { informationFractions, sides: 2, alpha, power: 0.9, efficacy };
		const design = designMonitoring(plan);
		expectRelative(design.looks.at(-1)!.cumulativeAlpha, alpha, 1e-9);
		for (const look of design.looks)
			if (look.efficacyZ !== null) expect(Number.isFinite(look.efficacyZ)).toBe(true);
		expect(design.drift).toBeGreaterThan(0);
	});

	test('looks that cannot be told apart are refused by name', () => {
		const plan = equal(2, { kind: 'pocock' }, { informationFractions: [0.5, 0.5 + 1e-12, 1] });
		expect(() => designMonitoring(plan)).toThrow(/too close together/);
	});
});

test('whatever the plan, α and power are spent exactly (property)', () => {
	const spacing = fc.array(fc.double({ min: 0.05, max: 1, noNaN: true }), {
		minLength: 1,
		maxLength: 7
	});
	fc.assert(
		fc.property(
			spacing,
			fc.constantFrom(...rules),
			fc.constantFrom<1 | 2>(1, 2),
			fc.double({ min: 0.001, max: 0.2, noNaN: true }),
			fc.double({ min: 0.5, max: 0.97, noNaN: true }),
			fc.boolean(),
			(gaps, efficacy, sides, alpha, power, stopsEarly) => {
				const total = gaps.reduce((a, b) => a + b, 0);
				let sum = 0;
				const informationFractions = gaps.map((gap) => (sum += gap) / total);
				informationFractions[gaps.length - 1] = 1;
				const futility: FutilityRule | null =
					stopsEarly && sides === 1
						? { kind: 'spending-power', parameter: 3, beta: 1 - power }
						: null;
				const design = designMonitoring({
					informationFractions,
					sides,
					alpha,
					power,
					efficacy,
					futility
				});
				const free = stoppingProbabilities(boundariesOf(design, 'ignored'), 0);
				expectWithin(free.upper.reduce((a, b) => a + b, 0) * sides, alpha, 1e-10);
				expectWithin(operatingCharacteristics(design, design.drift).power, power, 1e-9);
				if (!futility) expect(design.inflationFactor).toBeGreaterThan(1 - 1e-9);
			}
		),
		{ numRuns: 60, seed: 3 }
	);
});

test('more futility costs more information, and a boundary that meets efficacy is refused', () => {
	const plan = equal(3, { kind: 'spending-obrien-fleming' });
	const free = designMonitoring(plan);
	const obeyed = designMonitoring({ ...plan, futility: { kind: 'spending-pocock', beta: 0.1 } });
	expect(obeyed.inflationFactor).toBeGreaterThan(free.inflationFactor);
	expect(() =>
		designMonitoring({ ...plan, futility: { kind: 'fixed', z: [0, 5], beta: 0.1 } })
	).toThrow(/look 2 of 3/);
});

test.each([
	[{ informationFractions: [] }, /1 to 20 looks/],
	[{ informationFractions: [0.5, 0.4, 1] }, /increase/],
	[{ informationFractions: [0.5, NaN, 1] }, /increase/],
	[{ informationFractions: [0.5, 0.9] }, /must be 1/],
	[{ alpha: 0 }, /Alpha/],
	[{ alpha: 0.6 }, /Alpha/],
	[{ alpha: NaN }, /Alpha/],
	[{ power: 0.01 }, /Power/],
	[{ power: 1 }, /Power/],
	[{ efficacy: { kind: 'spending-power' as const } }, /parameter/],
	[{ efficacy: { kind: 'pocock' as const, parameter: 1 } }, /takes no parameter/],
	[{ efficacy: { kind: 'spending-gamma' as const, parameter: 1e6 } }, /between/],
	[{ efficacy: { kind: 'haybittle' as 'pocock' } }, /must be one of pocock/],
	[{ sides: 2 as const, futility: { kind: 'spending-pocock' as const, beta: 0.1 } }, /one-sided/],
	[{ futility: { kind: 'spending-pocock' as const, beta: 0.2 } }, /do not agree/],
	[{ futility: { kind: 'fixed' as const, z: [0], beta: 0.1 } }, /each look but the last/]
])('a plan that cannot be, %j, is refused with a sentence', (change, sentence) => {
	const plan = { ...equal(3, { kind: 'pocock' }), ...change };
	expect(() => designMonitoring(plan)).toThrow(sentence);
});
