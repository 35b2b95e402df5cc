import { describe, expect, test } from 'vitest';
import { fitModel, type ModelFit } from '../fit/fit-model.js';
import { profileAt } from '../fit/objective-of.js';
import { chiSquareTail } from '../numeric/chi-square.js';
import type { FitMethod } from '../plan.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { referenceDesign, type ReferenceSet } from '../reference/reference-design.js';
import { referenceFits, referenceModels } from '../reference/reference-fits.js';
import { componentIntervals } from './component-intervals.js';
import { componentsOf, intraclassCorrelationOf } from './components.js';
import { likelihoodRatioTest } from './likelihood-ratio.js';

const sets: ReferenceSet[] = ['orthodont', 'sleepstudy', 'btheb', 'ovary', 'penicillin'];

function fitOf(set: ReferenceSet, key: string): ModelFit {
	const [model, method] = key.split('.') as [string, string];
	const expected = referenceFits(set).fits[key]!;
	return fitModel(referenceDesign(set, expected.coef_names), referenceModels[model]!, {
		method: method.toLowerCase() as FitMethod
	});
}

describe('derived numbers agree with the collection', () => {
	test.each(
		sets.flatMap((set) =>
			Object.entries(referenceFits(set).fits)
				.filter(([, e]) => e.derived && !e.singular)
				.map(([key, e]) => ({ set, key, derived: e.derived! }))
		)
	)('$set, $key', ({ set, key, derived }) => {
		const fit = fitOf(set, key);
		const of = (name: string) => componentsOf(fit).find((c) => c.name === name)?.estimate;
		const near = set === 'btheb' && key.startsWith('M2') ? 1e-4 : 1e-5;
		for (const [name, value] of Object.entries(derived)) {
			if (name === 'range') expectRelative(of('range')!, value, near, name);
			if (name.startsWith('icc_subject'))
				expectRelative(intraclassCorrelationOf(fit)!, value, near, name);
			if (name === 'cor_intercept_slope')
				expectWithin(of('level–slope correlation')!, value, near, name);
		}
	});
});

describe('profile limits by ML agree with lme4’s', () => {
	test.each(['M1', 'M2'].flatMap((model) => sets.slice(0, 4).map((set) => ({ model, set }))))(
		'$set, $model',
		({ model, set }) => {
			const expected = referenceFits(set).profile_ci_95_ML[model];
			if (!expected) return expect(set === 'ovary' && model === 'M2').toBe(true);
			const limits = componentIntervals(fitOf(set, `${model}.ML`));
			const names: Record<string, string> = {
				'sd_(Intercept)|subject': 'subject level',
				'sd_time|subject': 'subject slope',
				sigma: 'residual'
			};
			for (const [theirs, ours] of Object.entries(names)) {
				const want = expected[theirs];
				if (!want) continue;
				const found = limits.find((c) => c.name === ours)!;
				expectWithin(Math.sqrt(found.lower!), want.lower, 1e-3 * want.upper, `${ours} lower`);
				expectRelative(Math.sqrt(found.upper!), want.upper, 1e-3, `${ours} upper`);
			}
			const correlation = expected['cor_time.(Intercept)|subject'];
			if (correlation) {
				const found = limits.find((c) => c.name === 'level–slope correlation')!;
				expectWithin(found.lower!, correlation.lower, 2e-3, 'correlation lower');
				expectWithin(found.upper!, correlation.upper, 2e-3, 'correlation upper');
			}
		}
	);
});

describe('profile limits', () => {
	test.each([
		['sleepstudy', 'M3n.REML'],
		['ovary', 'M4n.ML'],
		['orthodont', 'M8csh_cat.REML'],
		['orthodont', 'M7_cat.REML']
	] as const)('%s, %s: estimates lie within, and wider confidence is wider', (set, key) => {
		const fit = fitOf(set, key);
		const narrow = componentIntervals(fit, 0.8);
		const wide = componentIntervals(fit, 0.95);
		narrow.forEach((n, i) => {
			const w = wide[i]!;
			expect(n.name).toBe(w.name);
			const order = [
				w.lower ?? -Infinity,
				n.lower ?? -Infinity,
				n.estimate!,
				n.upper ?? Infinity,
				w.upper ?? Infinity
			];
			expect(order, n.name).toEqual([...order].sort((a, b) => a - b));
		});
		expect(profileAt(fit.prepared, fit.method, Float64Array.from(fit.working))).not.toBeNull();
	});

	test('a range that the data bound from below only has no upper limit, rather than an enormous one', () => {
		const limits = componentIntervals(fitOf('btheb', 'M3n.REML'));
		const range = limits.find((c) => c.name === 'range')!;
		expect(range.lower).toBeGreaterThan(0);
		expect(range.upper).toBeNull();
	});

	test('a component at zero has zero for its lower limit and a positive upper one', () => {
		const visit = componentIntervals(fitOf('sleepstudy', 'M5.REML')).find(
			(c) => c.name === 'visit'
		)!;
		expect(visit).toMatchObject({ estimate: 0, lower: 0, atEdge: true });
		expect(visit.upper).toBeGreaterThan(0);
	});
});

describe('likelihood-ratio tests agree with the collection', () => {
	test.each(
		sets.flatMap((set) =>
			referenceFits(set)
				.likelihood_ratio_tests.filter((t) => !t.alternative.match(/M[56]/))
				.map((expected) => ({ set, expected }))
		)
	)('$set, $expected.null against $expected.alternative, $expected.method', ({ set, expected }) => {
		const smaller = fitOf(set, `${expected.null}.${expected.method}`);
		const larger = fitOf(set, `${expected.alternative}.${expected.method}`);
		const ours = likelihoodRatioTest(smaller, larger);
		expectWithin(ours.statistic, expected.statistic, 5e-6, 'statistic');
		// The collection calls a vanishing continuous-time correlation interior and says to halve it.
		const halved = expected.alternative === 'M3' ? expected.p_mixture / 2 : expected.p_mixture;
		if (expected.statistic > 1e-5) expectRelative(ours.p!, halved, 1e-4, 'p');
	});

	test('parameters inside their space are counted: chi-squared on their number', () => {
		const cs = fitOf('orthodont', 'M8cs_cat.REML');
		const others: [string, number][] = [
			['M8csh_cat', 3],
			['M8toep_cat', 2],
			['M7_cat', 8]
		];
		for (const [model, df] of others) {
			const larger = fitOf('orthodont', `${model}.REML`);
			const ours = likelihoodRatioTest(cs, larger);
			expectRelative(ours.statistic, 2 * (larger.logLikelihood - cs.logLikelihood), 1e-12);
			expectRelative(ours.p!, chiSquareTail(ours.statistic, df), 1e-12);
			expect(ours.mixture!.at(-1)).toBe(1);
			expect(ours.mixture!.length).toBe(df + 1);
		}
		// And not the other way round.
		expect(likelihoodRatioTest(fitOf('orthodont', 'M7_cat.REML'), cs).p).toBeNull();
	});

	test('a visit variance is left to the bootstrap, and so is level against serial', () => {
		const visit = likelihoodRatioTest(
			fitOf('penicillin', 'M1.REML'),
			fitOf('penicillin', 'M5.REML')
		);
		expect(visit.p).toBeNull();
		expect(visit.statistic).toBeGreaterThan(280);
		const other = likelihoodRatioTest(fitOf('ovary', 'M1.REML'), fitOf('ovary', 'M3.REML'));
		expect(other.p).toBeNull();
	});

	test('fits by different methods or with different means are refused', () => {
		expect(() => likelihoodRatioTest(fitOf('ovary', 'M1.REML'), fitOf('ovary', 'M4.ML'))).toThrow(
			expect.objectContaining({ code: 'bad-option' })
		);
		expect(() =>
			likelihoodRatioTest(fitOf('orthodont', 'M1.REML'), fitOf('orthodont', 'M8csh_cat.REML'))
		).toThrow(expect.objectContaining({ code: 'bad-option' }));
	});
});

describe('the chi-squared tail', () => {
	test('is erfc(√(x/2)) with one and exp(−x/2) with two degrees of freedom, far out too', () => {
		for (const x of [0.01, 1, 5, 40, 200, 700])
			expectRelative(chiSquareTail(x, 2), Math.exp(-x / 2), 1e-11);
		// Abramowitz & Stegun, table 26.8, from memory: 3.84146 leaves 0.05, 10.8276 leaves 0.001.
		expectWithin(chiSquareTail(3.841458820694124, 1), 0.05, 1e-12);
		expectWithin(chiSquareTail(10.827566170662733, 1), 0.001, 1e-13);
		expect(chiSquareTail(-1, 3)).toBe(1);
	});
});
