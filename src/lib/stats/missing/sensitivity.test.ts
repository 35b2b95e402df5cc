import { describe, expect, test } from 'vitest';
import { analyse } from '../analysis/analyse.js';
import { buildModelDesign } from '../design/build-model-design.js';
import { fitModel } from '../fit/fit-model.js';
import { randomStream } from '../numeric/random.js';
import { readPlan } from '../read-plan.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { completeColumns } from './complete.js';
import { drawMissing } from './impute.js';
import { poolEstimates } from './pool.js';
import {
	deltaSensitivity,
	poolSensitivity,
	sensitivityReplicates,
	type SensitivityReplicates
} from './sensitivity.js';

/** 60 subjects, visits 0 to 3, level sd 2, error sd 1; group b gains 1 a visit more; those who leave do so by their last. */
function trial(leaving: boolean) {
	const random = randomStream(21);
	const columns = { id: [], t: [], v: [], arm: [], y: [] } as Record<
		string,
		(number | string | null)[]
	>;
	for (let s = 0; s < 60; s++) {
		const level = 2 * random.normal();
		let there = true;
		for (let t = 0; t < 4; t++) {
			const y = 10 + level + t * (s % 2 ? 2 : 1) + random.normal();
			columns.id!.push(s);
			columns.t!.push(t);
			columns.v!.push(`v${t}`);
			columns.arm!.push(s % 2 ? 'b' : 'a');
			columns.y!.push(there ? y : null);
			if (leaving && random.uniform() < 1 / (1 + Math.exp(2.5 - 0.2 * (y - 10)))) there = false;
		}
	}
	return columns;
}

const plan = readPlan({
	outcome: 'y',
	subject: 'id',
	time: 't',
	visit: 'v',
	group: 'arm',
	mean: { time: 'categorical' },
	subjectEffects: 'none',
	errors: { structure: 'unstructured' },
	degreesOfFreedom: 'satterthwaite',
	contrasts: [{ name: 'end', weights: { 'group b': 1, 'visit v3 × group b': 1 } }]
});
const holed = trial(true);

describe('shifting outcomes after dropout', () => {
	const lines = { ...plan, mean: { ...plan.mean, time: 'linear' as const } };
	const level = {
		...lines,
		subjectEffects: 'level' as const,
		errors: { ...plan.errors, structure: 'independent' as const },
		contrasts: [{ name: 'slopes', weights: { 'time × group b': 1 } }]
	};

	test('complete data give the model’s own estimate for any δ, exactly', () => {
		const whole = trial(false);
		const own = analyse(whole, plan).contrasts[0]!;
		const { contrasts, imputed } = deltaSensitivity(whole, plan, { deltas: [-5, 0, 5], seed: 1 });
		expect(imputed).toBe(0);
		for (const row of contrasts[0]!.rows)
			expect(row).toMatchObject({ estimate: own.estimate, se: own.se, df: own.df, p: own.p });
		expect(contrasts[0]!.tipping).toEqual({ below: null, above: null });
	});

	test.each<[string, typeof level | typeof plan, 'drawn' | 'held']>([
		['a level, covariance drawn', level, 'drawn'],
		['a level, covariance held', level, 'held'],
		['a level and shared visit effects', { ...level, visitEffects: true }, 'drawn'],
		[
			'serial errors',
			{ ...level, subjectEffects: 'none', errors: { ...plan.errors, structure: 'serial' } },
			'drawn'
		],
		['unstructured over visits', plan, 'drawn']
	])('δ = 0 agrees with the model itself within Monte Carlo error: %s', (_, asked, covariance) => {
		const { contrasts, held } = deltaSensitivity(holed, asked, {
			deltas: [0],
			seed: 4,
			imputations: 40,
			covariance
		});
		const { own, rows } = contrasts[0]!;
		const [row] = rows;
		const direct = analyse(holed, asked, { componentLimits: false }).contrasts[0]!;
		expectWithin(own.estimate, direct.estimate, 1e-6 * direct.se);
		expectRelative(own.standardError, direct.se, 1e-5);
		expectRelative(own.df, direct.df, 1e-4);
		expect(row!.monteCarloSe).toBeGreaterThan(0);
		expect(Math.abs(row!.estimate - own.estimate)).toBeLessThan(3.5 * row!.monteCarloSe);
		expect(Math.abs(row!.se / own.standardError - 1)).toBeLessThan(0.2);
		expect(row!.df).toBeLessThan(240);
		expect(held).toBe(0);
	});

	test('with visits as categories the mean moves by δ times the share that left, exactly', () => {
		const deltas = [-2, 0, 3];
		const { contrasts, imputed, subjects } = deltaSensitivity(holed, plan, {
			deltas,
			shift: { b: 1 },
			seed: 2,
			imputations: 4
		});
		const rows = holed.y!.map((y, i) => ({ y, v: holed.v![i], arm: holed.arm![i] }));
		const gone = rows.filter((r) => r.y === null);
		const share = gone.filter((r) => r.v === 'v3' && r.arm === 'b').length / 30;
		expect(share).toBeGreaterThan(0.1);
		expect(imputed).toBe(gone.length);
		expect(subjects).toBe(gone.filter((r) => r.v === 'v3').length);
		const found = contrasts[0]!.rows;
		const middle = found[1]!.estimate;
		deltas.forEach((delta, d) => expectWithin(found[d]!.estimate - middle, delta * share, 1e-7));
	});

	test('at the tipping point the interval has zero at its edge', () => {
		const options = { seed: 7, imputations: 10, shift: { b: 1 } };
		const grid = Array.from({ length: 7 }, (_, i) => -12 + 2 * i);
		const { contrasts } = deltaSensitivity(holed, level, { ...options, deltas: grid });
		const { below } = contrasts[0]!.tipping;
		expect(below).not.toBeNull();
		const there = deltaSensitivity(holed, level, { ...options, deltas: [below!] });
		const [row] = there.contrasts[0]!.rows;
		expect(Math.abs(row!.p - 0.05)).toBeLessThan(0.02);
		expect(contrasts[0]!.rows.at(-1)!.p).toBeLessThan(0.05);
	});

	test('any split gives the same bits, and parts that do not fit are refused', () => {
		const options = { deltas: [0, -1], seed: 9 };
		const part = (from: number, to: number): SensitivityReplicates =>
			sensitivityReplicates(holed, level, options, [from, to]);
		const whole = poolSensitivity([part(0, 5)]);
		expect(poolSensitivity([part(3, 5), part(0, 3)])).toEqual(whole);
		expect(() => poolSensitivity([part(0, 2), part(3, 5)])).toThrow(/do not fit together/);
		expect(() => poolSensitivity([])).toThrow(/do not fit together/);
	});

	test('rows that are not there are put in, gaps are left, and the never observed are counted', () => {
		const columns = {
			id: ['x', 'x', 'x', 'y', 'y', 'z', 'w', 'w', 'w', 'w'],
			v: ['1', '2', '4', '1', '2', '1', '1', '2', '3', '4'],
			t: [0, 1, 3, 0, 1.2, 0, 0, 1, 2, 3.4],
			y: [1, null, 4, 2, 3, null, 1, 2, 3, 4],
			bmi: [20, 20, 20, 21, 22, 20, 19, 19, 19, 19]
		};
		const bare = readPlan({
			outcome: 'y',
			subject: 'id',
			time: 't',
			visit: 'v',
			mean: { covariates: [{ name: 'bmi', kind: 'numeric' }] }
		});
		const { columns: full, impute, neverObserved } = completeColumns(columns, bare);
		expect(neverObserved).toBe(1);
		expect([...impute]).toEqual([0, 0, 0, 0, 0, 0, 0, 0, 0, 0, 1, 1]);
		expect(full.id!.slice(10)).toEqual(['y', 'y']);
		expect(full.v!.slice(10)).toEqual(['3', '4']);
		expect(full.t!.slice(10)).toEqual([2, 3.2]);
		expect(full.bmi!.slice(10)).toEqual([22, 22]);
		expect([...completeColumns(columns, bare, 'rows').impute]).toEqual(new Array(10).fill(0));
	});

	test('stops when asked, and refuses what makes no sense', () => {
		let asked = 0;
		const options = { deltas: [0], seed: 1 };
		expect(() =>
			deltaSensitivity(holed, level, options, { shouldStop: () => ++asked > 6 })
		).toThrow(expect.objectContaining({ code: 'stopped' }));
		const refused = (change: object, code: string) =>
			expect(() => deltaSensitivity(holed, level, { ...options, ...change })).toThrow(
				expect.objectContaining({ code })
			);
		refused({ deltas: [] }, 'bad-option');
		refused({ deltas: [NaN] }, 'bad-option');
		refused({ imputations: 1 }, 'bad-option');
		refused({ shift: { c: 1 } }, 'unknown-level');
		refused({ shift: { b: Infinity } }, 'bad-option');
	});
});

describe('imputations', () => {
	test('have the mean and the spread of the conditional distribution', () => {
		const level = {
			...plan,
			mean: { ...plan.mean, time: 'linear' as const },
			subjectEffects: 'level' as const,
			errors: { ...plan.errors, structure: 'independent' as const },
			contrasts: []
		};
		const { design } = buildModelDesign(trial(false), level);
		const fit = fitModel(design, level, { method: 'reml' });
		const missing = Uint8Array.from({ length: design.n }, (_, i) => (i === 2 || i === 3 ? 1 : 0));
		const value = (name: string) => fit.parameters.find((p) => p.name === name)!.value;
		const [tau, sigma] = [value('subject level'), value('residual')];
		const mean = (i: number) =>
			fit.beta.reduce((sum, b, j) => sum + b * design.x[j * design.n + i]!, 0);
		// Two seen outcomes of the first subject: the level given them.
		const residual = (design.y[0]! - mean(0) + design.y[1]! - mean(1)) / 2;
		const centre = ((2 * tau) / (2 * tau + sigma)) * residual;
		const open = (tau * sigma) / (2 * tau + sigma);
		const { normal } = randomStream(8);
		const draws = Array.from({ length: 1500 }, () => drawMissing(design, missing, fit, normal));
		const off = draws.map((y) => [y[2]! - mean(2) - centre, y[3]! - mean(3) - centre] as const);
		const average = (f: (o: readonly [number, number]) => number) =>
			off.reduce((sum, o) => sum + f(o), 0) / off.length;
		const sd = Math.sqrt(open + sigma);
		const root = Math.sqrt(off.length);
		expect(Math.abs(average((o) => o[0]))).toBeLessThan((4 * sd) / root);
		expect(Math.abs(average((o) => o[1]))).toBeLessThan((4 * sd) / root);
		expect(Math.abs(average((o) => o[0] ** 2) / sd ** 2 - 1)).toBeLessThan((4 * 1.5) / root);
		expect(Math.abs(average((o) => o[0] * o[1]) - open)).toBeLessThan((4 * 1.2 * sd * sd) / root);
		for (const y of draws.slice(0, 3)) expect([y[0], y[9]]).toEqual([design.y[0], design.y[9]]);
	});
});

describe('Rubin’s rules', () => {
	test('by hand: five estimates', () => {
		// Mean 3, W = 1, B = 2.5, T = 1 + 1.2 · 2.5 = 4, λ = 3/4.
		const pooled = poolEstimates([1, 2, 3, 4, 5], [1, 1, 1, 1, 1], [20, 20, 20, 20, 20]);
		expect(pooled).toMatchObject({ estimate: 3, se: 2, t: 1.5, missingShare: 0.75 });
		// ν_m = 4 / 0.5625, ν_obs = (21/23) · 20 · 0.25.
		expectRelative(pooled.df, 1 / (0.5625 / 4 + 23 / 105), 1e-12);
		expectRelative(pooled.monteCarloSe, Math.sqrt(0.5), 1e-12);
	});

	test('one data set cannot be pooled', () => {
		expect(() => poolEstimates([1], [1], [5])).toThrow(/at least two/);
	});
});
