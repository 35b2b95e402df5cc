import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import type { Columns } from '../design/columns.js';
import { occasionsOf } from '../dependence/occasions.js';
import { StatsError } from '../errors.js';
import type { AnalysisPlan, Mean } from '../plan.js';
import { readPlan } from '../read-plan.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { readRows, type ReferenceSet } from '../reference/reference-design.js';
import { referenceFits, referenceModels } from '../reference/reference-fits.js';
import { analyse, carryOut } from './analyse.js';
import { marginalVariances } from './effective-sizes.js';

/** A data set of the reference folder as columns; its numbers as numbers, its labels as they stand. */
function columnsOf(set: ReferenceSet): Columns {
	const rows = readRows(set);
	const labels = ['subject', 'visit', 'arm'];
	return Object.fromEntries(
		Object.keys(rows[0]!).map((name) => [
			name,
			labels.includes(name)
				? rows.map((row) => row[name]!)
				: Float64Array.from(rows, (row) => Number(row[name]))
		])
	);
}

const arm = { group: 'arm' };
const covariate = (name: string): Mean['covariates'][number] => ({ name, kind: 'numeric' });
/** The plan of a set; `visits` for the fits in which visits are categories. */
const means: Record<ReferenceSet, object> = {
	orthodont: arm,
	sleepstudy: {},
	btheb: { ...arm, mean: { covariates: [covariate('baseline')] } },
	ovary: { mean: { time: 'none', covariates: [covariate('s1'), covariate('c1')] } },
	penicillin: { mean: { time: 'none' } }
};

function planOf(set: ReferenceSet, key: string, more: Partial<AnalysisPlan> = {}): AnalysisPlan {
	const [model, method] = key.split('.') as [string, string];
	const base = means[set] as { mean?: Partial<Mean> };
	return readPlan({
		outcome: 'y',
		subject: 'subject',
		time: 'time',
		visit: 'visit',
		...base,
		mean: { ...base.mean, ...(model.endsWith('_cat') ? { time: 'categorical' } : {}) },
		...referenceModels[model],
		method: method.toLowerCase(),
		degreesOfFreedom: 'satterthwaite',
		...more
	});
}

/** Our name of a coefficient of the sources. */
function ourName(theirs: string): string {
	return theirs
		.split(':')
		.map((part) =>
			part === '(Intercept)'
				? 'intercept'
				: part === 'arm'
					? 'group 1'
					: part.replace(/^visitf(\d+)$/, 'visit $1')
		)
		.join(' × ');
}

const weightsOf = (names: readonly string[], l: readonly number[]) =>
	Object.fromEntries(names.flatMap((name, i) => (l[i] ? [[ourName(name), l[i]]] : [])));

describe('from plan and columns to the values of the reference', () => {
	const sets: ReferenceSet[] = ['orthodont', 'sleepstudy', 'btheb', 'ovary', 'penicillin'];
	const cases = sets.flatMap((set) =>
		Object.entries(referenceFits(set).fits)
			.filter(([key, fit]) => key.endsWith('REML') && !fit.singular && !key.startsWith('M4n'))
			.map(([key, expected]) => ({ set, key, expected }))
	);

	test.each(cases)('$set, $key', ({ set, key, expected }) => {
		const names = expected.coef_names;
		const contrasts = Object.entries(expected.contrasts ?? {}).map(([name, { L }]) => ({
			name,
			weights: weightsOf(names, L!)
		}));
		const result = analyse(columnsOf(set), planOf(set, key, { contrasts }));
		expect(result.converged).toBe(true);
		expect(result.coefficients.map((c) => c.name).sort()).toEqual(names.map(ourName).sort());
		expectWithin(result.logLikelihood, expected.logLik, 1e-6);
		expectWithin(result.aic, expected.AIC, 2e-6);
		expectWithin(result.bic.rows, expected.BIC_n_obs, 2e-6);
		expectWithin(result.bic.subjects, expected.BIC_n_subjects, 2e-6);
		for (const name of names) {
			const ours = result.coefficients.find((c) => c.name === ourName(name))!;
			expectWithin(ours.estimate, expected.beta[name]!, 1e-5 * expected.se[name]!);
			expectRelative(ours.se, expected.se[name]!, 1e-5);
		}
		for (const [name, theirs] of Object.entries(expected.contrasts ?? {})) {
			const ours = result.contrasts.find((c) => c.name === name)!;
			expectWithin(ours.estimate, theirs.estimate, 1e-5 * theirs.se);
			expectRelative(ours.se, theirs.se, 1e-5);
			if (theirs.satterthwaite) expectRelative(ours.df, theirs.satterthwaite.df, 1e-4);
		}
		if (key.startsWith('M1') && expected.derived)
			expectRelative(result.icc!.estimate, expected.derived.icc_subject!, 1e-5);
	});
});

describe('a result', () => {
	const plan = planOf('orthodont', 'M1.REML', {
		degreesOfFreedom: 'kenward-roger',
		contrasts: [{ name: 'difference in yearly change', weights: { 'time × group 1': 1 } }]
	});
	const data = columnsOf('orthodont');
	const result = analyse(data, plan);

	test('is plain data that JSON holds, with no number that is none', () => {
		const text = JSON.stringify(result);
		expect(JSON.parse(text)).toEqual(result);
		expect(text).not.toMatch(/NaN|Infinity/);
	});

	test('is the same bits for the same input', () => {
		expect(JSON.stringify(analyse(data, plan))).toBe(JSON.stringify(result));
	});

	test('says what was left out', () => {
		const y = Array.from(data.y!, (v, i) => (i === 3 ? null : v));
		const again = analyse({ ...data, y }, plan);
		expect(again.dropped).toEqual([{ reason: 'outcome', variable: 'y', rows: 1 }]);
		expect(again.warnings).toEqual([
			'Of 108 rows, 107 were used. Left out: 1 without an outcome. The model takes what is missing as missing at random.'
		]);
	});

	test('tells progress, and stops when asked to', () => {
		const told: number[] = [];
		analyse(data, plan, { onProgress: (fraction) => told.push(fraction) });
		expect(told).toEqual([...told].sort((a, b) => a - b));
		expect([told[0], told.at(-1)]).toEqual([0, 1]);
		expect(() => analyse(data, plan, { shouldStop: () => told.length > 0 })).toThrow(
			expect.objectContaining({ code: 'stopped' })
		);
	});

	test('names a coefficient that was left out, and a contrast that needs it is refused', () => {
		const twice = { ...data, twice: Float64Array.from(data.time as Float64Array, (t) => 2 * t) };
		const mean = { ...plan.mean, covariates: [covariate('twice')] };
		const again = analyse(twice, { ...plan, mean });
		expect(again.aliased).toEqual([{ name: 'twice', by: ['time'] }]);
		expect(again.warnings[0]).toMatch(/“twice” was left out: “time” determines it/);
		expectRelative(again.logLikelihood, result.logLikelihood, 1e-12);
		const contrasts = [{ name: 'odd', weights: { twice: 1 } }];
		expect(() => analyse(twice, { ...plan, mean, contrasts })).toThrow(
			/The contrast “odd” cannot be estimated: it needs “twice”/
		);
	});

	test('refuses a contrast that names no coefficient', () => {
		const contrasts = [{ name: 'odd', weights: { 'arm:time': 1 } }];
		expect(() => analyse(data, { ...plan, contrasts })).toThrow(StatsError);
	});
});

describe('a polynomial', () => {
	const plan = (degree: number) =>
		planOf('orthodont', 'M1.REML', {
			mean: { ...planOf('orthodont', 'M1.REML').mean, time: { degree } }
		});
	const data = columnsOf('orthodont');
	const powers = (k: number) => Float64Array.from(data.time as Float64Array, (t) => t ** k);

	test('has the coefficients, covariance and likelihood of its plain powers as covariates', () => {
		const girls = (data.arm as string[]).map(Number);
		const quadratic = analyse(data, plan(2));
		const byHand = analyse(
			{
				...data,
				square: powers(2),
				squareGirls: Float64Array.from(powers(2), (v, i) => v * girls[i]!)
			},
			planOf('orthodont', 'M1.REML', {
				mean: {
					...plan(1).mean,
					covariates: [covariate('square'), covariate('squareGirls')]
				}
			})
		);
		const pairs = [
			['intercept', 'intercept'],
			['time', 'time'],
			['time squared', 'square'],
			['group 1', 'group 1'],
			['time × group 1', 'time × group 1'],
			['time squared × group 1', 'squareGirls']
		] as const;
		for (const [ours, theirs] of pairs) {
			const a = quadratic.coefficients.find((c) => c.name === ours)!;
			const b = byHand.coefficients.find((c) => c.name === theirs)!;
			expectWithin(a.estimate, b.estimate, 1e-7 * b.se);
			expectRelative(a.se, b.se, 1e-7);
			expectRelative(a.df, b.df, 1e-6);
		}
		expectRelative(quadratic.logLikelihood, byHand.logLikelihood, 1e-10);
		const at = (r: typeof byHand, name: string) => r.coefficients.findIndex((c) => c.name === name);
		for (const [i, theirsI] of pairs)
			for (const [j, theirsJ] of pairs)
				expectWithin(
					quadratic.covariance[at(quadratic, i)]![at(quadratic, j)]!,
					byHand.covariance[at(byHand, theirsI)]![at(byHand, theirsJ)]!,
					1e-7 *
						quadratic.coefficients[at(quadratic, i)]!.se *
						quadratic.coefficients[at(quadratic, j)]!.se
				);
	});

	test('of degree 1 is the straight line', () => {
		const linear = analyse(data, planOf('orthodont', 'M1.REML'));
		expect(analyse(data, plan(1)).coefficients).toEqual(linear.coefficients);
	});
});

describe('an outcome on a log scale', () => {
	const data = columnsOf('orthodont');
	test('gives estimates of the logarithm and their ratios', () => {
		const plan = planOf('orthodont', 'M1.REML');
		const logs = { ...data, y: Float64Array.from(data.y as Float64Array, Math.log) };
		const direct = analyse(logs, plan);
		const ratios = analyse(data, { ...plan, scale: 'log' });
		ratios.coefficients.forEach((c, i) => {
			const { estimate, lower, upper } = direct.coefficients[i]!;
			expect(c.estimate).toBe(estimate);
			expect(c.ratio).toEqual({
				estimate: Math.exp(estimate),
				lower: Math.exp(lower),
				upper: Math.exp(upper)
			});
			expect(direct.coefficients[i]!.ratio).toBeNull();
		});
	});
});

describe('the variance of each row', () => {
	test.each(['M2.REML', 'M4.REML', 'M6.REML', 'M7_cat.REML', 'M8csh_cat.REML', 'M8toeph_cat.REML'])(
		'%s: is the diagonal of its subject’s covariance and the shared visit variance',
		(key) => {
			const { fit } = carryOut(columnsOf('btheb'), planOf('btheb', key));
			const { design, layout } = fit.prepared;
			const variances = marginalVariances(fit);
			for (let s = 0; s < design.subjects.length; s++) {
				const from = design.subjectStart[s]!;
				const m = design.subjectStart[s + 1]! - from;
				const v = fit.natural.covariance(occasionsOf(design, layout, s));
				for (let i = 0; i < m; i++)
					expectRelative(
						variances[from + i]!,
						fit.scale * (v[i * m + i]! + fit.natural.visitRatio),
						1e-12
					);
			}
		}
	);
});

describe('effective sample size', () => {
	test('of the mean under a level is the sum of n / (1 + (n − 1) ICC)', () => {
		const { result, built } = carryOut(columnsOf('btheb'), planOf('btheb', 'M1.REML'));
		const { subjectStart } = built.design;
		let expected = 0;
		for (let s = 0; s + 1 < subjectStart.length; s++) {
			const m = subjectStart[s + 1]! - subjectStart[s]!;
			expected += m / (1 + (m - 1) * result.icc!.estimate);
		}
		expectRelative(result.effectiveSampleSize.mean, expected, 1e-10);
		expect(expected).toBeGreaterThan(built.counts.subjects);
		expect(expected).toBeLessThan(built.counts.observations);
	});

	test('is the rows when rows are independent, for the mean and for contrasts', () => {
		const result = analyse(
			columnsOf('orthodont'),
			planOf('orthodont', 'M0.REML', { contrasts: [{ name: 'slope', weights: { time: 1 } }] })
		);
		expectRelative(result.effectiveSampleSize.mean, 108, 1e-12);
		expectRelative(result.contrasts[0]!.effectiveSampleSize, 108, 1e-12);
	});

	test('of a contrast within subjects may exceed the rows', () => {
		const result = analyse(
			columnsOf('orthodont'),
			planOf('orthodont', 'M1.REML', { contrasts: [{ name: 'slope', weights: { time: 1 } }] })
		);
		// In a balanced design under a level, a slope within subjects gains 1 / (1 − ICC).
		expectRelative(
			result.contrasts[0]!.effectiveSampleSize,
			108 / (1 - result.icc!.estimate),
			1e-9
		);
	});

	test('of the mean under visit effects shared by all may fall below the subjects', () => {
		const { result, built } = carryOut(columnsOf('penicillin'), planOf('penicillin', 'M5.REML'));
		expect(result.effectiveSampleSize.mean).toBeLessThan(built.counts.subjects);
		// A balanced two-way layout: the variance of the grand mean is level / I + visit / J + residual / IJ.
		const part = (name: string) => result.varianceComponents.find((c) => c.name === name)!.estimate;
		const [level, visit, residual] = ['subject level', 'visit', 'residual'].map(part) as [
			number,
			number,
			number
		];
		const mean = level / 24 + visit / 6 + residual / 144;
		expectRelative(result.effectiveSampleSize.mean, (level + visit + residual) / mean, 1e-8);
	});
});

describe('properties', () => {
	const data = columnsOf('btheb');
	const n = data.y!.length;
	const plan = planOf('btheb', 'M2.REML');
	const whole = analyse(data, plan);

	test('permuting rows and relabelling subjects changes nothing', () => {
		fc.assert(
			fc.property(fc.shuffledSubarray([...Array(n).keys()], { minLength: n }), (order) => {
				const shuffled = Object.fromEntries(
					Object.entries(data).map(([name, column]) => [
						name,
						order.map((i) => (name === 'subject' ? `${String(column[i]).slice(1)}*` : column[i]!))
					])
				) as Columns;
				const again = analyse(shuffled, plan);
				expectWithin(again.logLikelihood, whole.logLikelihood, 1e-8);
				again.coefficients.forEach((c, i) => {
					const before = whole.coefficients[i]!;
					expect(c.name).toBe(before.name);
					expectWithin(c.estimate, before.estimate, 1e-5 * before.se);
					expectRelative(c.se, before.se, 1e-5);
				});
			}),
			{ numRuns: 8, seed: 21 }
		);
	});

	test('shifting a covariate changes the intercept only', () => {
		fc.assert(
			fc.property(fc.double({ min: -1e6, max: 1e6, noNaN: true }), (shift) => {
				const baseline = Float64Array.from(data.baseline as Float64Array, (v) => v + shift);
				const again = analyse({ ...data, baseline }, plan);
				const by = (r: typeof whole, name: string) => r.coefficients.find((c) => c.name === name)!;
				for (const before of whole.coefficients.filter((c) => c.name !== 'intercept')) {
					expectWithin(by(again, before.name).estimate, before.estimate, 1e-5 * before.se);
					expectRelative(by(again, before.name).se, before.se, 1e-5);
				}
				expectWithin(
					by(again, 'intercept').estimate,
					by(whole, 'intercept').estimate - shift * by(whole, 'baseline').estimate,
					1e-5 * by(again, 'intercept').se
				);
			}),
			{ numRuns: 8, seed: 22 }
		);
	});
});
