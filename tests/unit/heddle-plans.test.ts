import { spawnSync } from 'node:child_process';
import { mkdtempSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, test } from 'vitest';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { expectWithin } from '../../src/lib/stats/reference/close';
import {
	expectedMonitoring,
	expectedSampleSizes
} from '../../src/lib/stats/reference/load-designs';
import { planOf } from '../../src/lib/stats/reference/monitoring-plans';

const folder = mkdtempSync(join(tmpdir(), 'heddle-plans-'));
const write = (name: string, content: unknown) => {
	writeFileSync(
		join(folder, name),
		typeof content === 'string' ? content : JSON.stringify(content)
	);
	return name;
};

/** The program as a person runs it, from a folder of their own, with no database named. */
function heddle(...args: string[]) {
	const { status, stdout, stderr } = spawnSync(
		process.execPath,
		[join(root, 'bin/heddle.mjs'), ...args],
		{
			cwd: folder,
			encoding: 'utf8',
			env: { PATH: process.env.PATH, HOME: folder, HEDDLE_BUILD_DIR: testBuild.buildDir }
		}
	);
	return { status, stdout, stderr };
}

const { designs, interim, final_analysis } = expectedMonitoring();

describe('npx heddle boundaries', () => {
	test.each(['obf_k5_two_sided', 'hsd_minus4_k3_one_sided', 'ld_obf_k3_beta_obf_nonbinding'])(
		'%s: one JSON document and nothing else, with the reference’s boundaries',
		(id) => {
			const expected = designs[id]!;
			const { status, stdout, stderr } = heddle(
				'boundaries',
				'--plan',
				write('m.json', planOf(expected))
			);
			expect([status, stderr]).toEqual([0, '']);
			const result = JSON.parse(stdout);
			expected.critical_z.forEach((z, k) => {
				expectWithin(result.looks[k].efficacyZ, z, 1e-6);
				expectWithin(result.looks[k].fraction, expected.information_fractions[k]!, 0);
				expectWithin(result.looks[k].nominalPOneSided, expected.nominal_p_one_sided[k]!, 1e-7);
				const spent = expected.cumulative_alpha_spent_total[k]!;
				expectWithin(result.looks[k].cumulativeAlpha, spent, 1e-7);
			});
			const drift =
				expected.futility?.drift_at_design_alternative ?? expected.efficacy_only.drift_for_power;
			expectWithin(result.drift, drift, 1e-6);
			expect('futilityZ' in result.looks[0]).toBe(expected.sided === 1);
		}
	);

	test('a look: conditional power, and the analysis as if the trial stopped there', () => {
		const [seen, stop] = [interim[0]!, final_analysis[0]!];
		const at = (look: number, z: number) => ({
			...planOf(designs[seen.design]!),
			observed: { look, z }
		});
		const first = JSON.parse(
			heddle('boundaries', '--plan', write('m.json', at(seen.look, seen.z))).stdout
		);
		const any = seen.conditional_power_any_remaining_look;
		expectWithin(first.conditionalPower.trend, any.current_trend, 1e-7);
		expectWithin(first.conditionalPower.none, any.null, 1e-7);
		expectWithin(first.predictivePower, seen.predictive_power_flat_prior_any_remaining_look, 1e-7);
		const second = JSON.parse(
			heddle('boundaries', '--plan', write('m.json', at(stop.stop_look!, stop.z))).stdout
		);
		expectWithin(second.stagewiseP, stop.p_value_one_sided_stagewise, 1e-7);
		expectWithin(second.medianUnbiasedDrift, stop.drift_median_unbiased, 1e-6);
		expectWithin(second.driftInterval[0], stop.drift_ci_lower, 1e-6);
		expectWithin(second.driftInterval[1], stop.drift_ci_upper, 1e-6);
	});

	test('a table for reading', () => {
		const plan = { ...planOf(designs['ld_obf_k3_one_sided']!), observed: { look: 2, z: 2.8 } };
		const { status, stdout } = heddle('boundaries', '--plan', write('m.json', plan), '--table');
		expect(status).toBe(0);
		expect(stdout).toMatch(/^look +fraction +efficacy z/);
		expect(stdout).toContain('Look 2 with z = 2.8 reached efficacy.');
	});

	test.each([
		[['boundaries'], /^Name the plan\./],
		[['boundaries', '--plan', 'absent.json'], /^The plan absent\.json cannot be read\.$/],
		[['boundaries', '--plan', write('bad.json', '{"alpha": ')], /is not JSON/],
		[
			['boundaries', '--plan', write('odd.json', { alpha: 0.05 })],
			/^informationFractions is missing/
		],
		[['boundaries', '--colour'], /^--colour is not understood here/],
		[['design', '--plan', write('odd.json', { alpha: 0.05 })], /^question is missing/]
	])('%j: one sentence on standard error, status 1', (args, sentence) => {
		const { status, stdout, stderr } = heddle(...args);
		expect([status, stdout]).toEqual([1, '']);
		expect(stderr.trimEnd()).toMatch(sentence);
		expect(stderr.trimEnd()).not.toContain('\n');
	});
});

describe('npx heddle design', () => {
	const expected = expectedSampleSizes().slopes[0]!;
	const plan = {
		question: 'slope-difference',
		difference: expected.slope_difference,
		times: expected.times,
		variances: { residual: expected.sigma2, level: expected.tau2_intercept },
		power: expected.power
	};

	test('the subjects of the reference', () => {
		const { status, stdout, stderr } = heddle('design', '--plan', write('d.json', plan));
		expect([status, stderr]).toEqual([0, '']);
		const result = JSON.parse(stdout);
		expect(result.subjects).toEqual({ arm0: expected.n_arm0, arm1: expected.n_arm1, total: 68 });
		expect(result.simulation).toBeNull();
	});

	test('a simulation is the same whatever the number of threads', () => {
		const simulated = (workers: number) => {
			const simulation = { replicates: 300, seed: 4, workers };
			return heddle('design', '--plan', write('d.json', { ...plan, simulation })).stdout;
		};
		const one = simulated(1);
		expect(simulated(3)).toBe(one);
		const { underDesign, underNull } = JSON.parse(one).simulation;
		expectWithin(underDesign.above.estimate, 0.9, 4 * underDesign.above.error + 0.01);
		expectWithin(underNull.eitherSide.estimate, 0.05, 4 * underNull.eitherSide.error);
	});
});
