import { describe, expect, test } from 'vitest';
import { buildDesign } from '../design/design.js';
import { denseDeviance } from '../fit/dense.js';
import { fitMixed } from '../fit/fit-mixed.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { expectedValues, referenceRows, referenceSpecs, type DataSet } from '../reference/load.js';
import type { GrowthRow, Method } from '../types.js';
import { testContrast } from './contrast.js';
import { precisionRule } from './degrees-of-freedom.js';
import { effectiveSampleSize, intraclassCorrelation } from './effective-size.js';
import { expectedCovariance, observedCovariance } from './information.js';
import { varianceIntervals } from './variance-intervals.js';

const fitOf = (set: DataSet, method: Method, randomIntercept = true) =>
	fitMixed(buildDesign(referenceRows(set), referenceSpecs[set]), { method, randomIntercept });

describe('intervals of variances', () => {
	test.each(['orthodont', 'sleepstudy', 'btheb'] as const)(
		'%s by ML: profile limits agree with lme4’s',
		(set) => {
			const { subject, residual } = varianceIntervals(fitOf(set, 'ML'), 0.95);
			const expected = expectedValues(set).profile_ci_95_ML_M1;
			const sd = expected['sd_(Intercept)|subject']!;
			expectRelative(Math.sqrt(subject!.lower), sd.lower, 1e-3);
			expectRelative(Math.sqrt(subject!.upper), sd.upper, 1e-3);
			expectRelative(Math.sqrt(residual.lower), expected.sigma!.lower, 1e-3);
			expectRelative(Math.sqrt(residual.upper), expected.sigma!.upper, 1e-3);
		}
	);

	test('at each REML limit the likelihood has fallen by the chi-squared quantile, whatever else is tried', () => {
		const fit = fitOf('orthodont', 'REML');
		const { subject, residual, icc } = varianceIntervals(fit, 0.95);
		const ceiling = -2 * fit.logLikelihood + 3.841458820694124;
		const grid = Array.from({ length: 400 }, (_, i) => Math.exp(-1.5 + i / 100));
		const lowest = (f: (x: number) => number) => Math.min(...grid.map(f));
		const dense = (s: number, r: number) => denseDeviance(fit.design, 'REML', s, r);
		for (const s of [subject!.lower, subject!.upper])
			expectWithin(
				lowest((r) => dense(s, r)),
				ceiling,
				1e-2
			);
		for (const r of [residual.lower, residual.upper])
			expectWithin(
				lowest((s) => dense(s, r)),
				ceiling,
				1e-2
			);
		for (const rho of [icc!.lower, icc!.upper])
			expectWithin(
				lowest((total) => dense(2 * rho * total, 2 * (1 - rho) * total)),
				ceiling,
				1e-2
			);
	}, 120_000);

	test('a wider confidence gives wider limits, with the estimate inside', () => {
		const fit = fitOf('btheb', 'REML');
		const narrow = varianceIntervals(fit, 0.8);
		const wide = varianceIntervals(fit, 0.99);
		for (const name of ['subject', 'residual', 'icc'] as const) {
			const limits = [
				wide[name]!.lower,
				narrow[name]!.lower,
				narrow[name]!.estimate,
				narrow[name]!.upper,
				wide[name]!.upper
			];
			expect(limits).toEqual([...limits].sort((a, b) => a - b));
			expect(new Set(limits).size).toBe(5);
		}
	});

	test('without an offset only the residual has limits; on the boundary the subject’s begin at zero', () => {
		const plain = varianceIntervals(fitOf('orthodont', 'REML', false), 0.95);
		expect(plain.subject).toBeNull();
		expect(plain.icc).toBeNull();
		expect(plain.residual.lower).toBeLessThan(plain.residual.estimate);
		expect(plain.residual.upper).toBeGreaterThan(plain.residual.estimate);

		const rows = Array.from({ length: 6 }, (_, s) =>
			[0, 1, 2, 3].map((v): GrowthRow => ({
				subject: `s${s}`,
				time: v,
				outcome: (v % 2 ? -1 : 1) * (2 + s / 3)
			}))
		).flat();
		const edge = fitMixed(buildDesign(rows, {}), { method: 'REML', randomIntercept: true });
		const limits = varianceIntervals(edge, 0.95);
		expect(limits.subject).toMatchObject({ estimate: 0, lower: 0 });
		expect(limits.icc).toMatchObject({ estimate: 0, lower: 0 });
		expect(limits.subject!.upper).toBeGreaterThan(0);
		expect(limits.icc!.upper).toBeLessThan(1);
	});
});

describe('effective sample size', () => {
	test('balanced data: N n / (1 + (n − 1) ICC), Kish (1965)', () => {
		const fit = fitOf('orthodont', 'REML');
		// ICC 0.63183885 is lme4's: 108 / (1 + 3 × 0.63183885).
		expectRelative(effectiveSampleSize(fit).forMean, 108 / (1 + 3 * 0.6318388498823877), 1e-8);
		expectRelative(effectiveSampleSize(fit).designEffect, 1 + 3 * 0.6318388498823877, 1e-8);
	});

	test('unbalanced data: a sum over subjects, between their number and that of the rows', () => {
		const fit = fitOf('btheb', 'REML');
		const icc = intraclassCorrelation(fit)!;
		const visits = new Map<string, number>();
		for (const r of referenceRows('btheb')) visits.set(r.subject, (visits.get(r.subject) ?? 0) + 1);
		const byHand = [...visits.values()].reduce((sum, n) => sum + n / (1 + (n - 1) * icc), 0);
		expectRelative(effectiveSampleSize(fit).forMean, byHand, 1e-12);
		expect(byHand).toBeGreaterThan(97);
		expect(byHand).toBeLessThan(280);
	});

	test('independent rows count in full', () => {
		expect(effectiveSampleSize(fitOf('btheb', 'REML', false))).toEqual({
			forMean: 280,
			designEffect: 1
		});
	});
});

describe('tests of contrasts', () => {
	test('variances the data say nothing about are refused', () => {
		const { curvature } = fitOf('orthodont', 'REML');
		// Two parameters that move V alike cannot be told apart.
		const alike = {
			...curvature,
			first: [curvature.first[0]!, curvature.first[0]!],
			second: [0, 1].map(() => [curvature.second[0]![0]!, curvature.second[0]![0]!]),
			traces: [0, 1].map(() => [curvature.traces[0]![0]!, curvature.traces[0]![0]!])
		};
		expect(() => expectedCovariance(alike)).toThrow(
			expect.objectContaining({ code: 'singular-information' })
		);
		expect(() => observedCovariance(alike, 'REML')).toThrow(
			expect.objectContaining({ code: 'singular-information' })
		);
	});

	test('naive degrees of freedom are rows − coefficients with the plain standard error', () => {
		const fit = fitOf('btheb', 'REML');
		const naive = testContrast(fit, precisionRule(fit, 'naive'), [0, 1, 0, 0, 0], 0.95);
		expect(naive.df).toBe(275);
		expectRelative(naive.standardError, fit.se[1]!, 1e-12);
	});

	test('Kenward–Roger is refused under ML, Satterthwaite is not', () => {
		const fit = fitOf('btheb', 'ML');
		expect(() => precisionRule(fit, 'kenward-roger')).toThrow(
			expect.objectContaining({ code: 'kenward-roger-needs-reml' })
		);
		expect(precisionRule(fit, 'satterthwaite').kind).toBe('satterthwaite');
	});

	test('wrong weights are refused', () => {
		const fit = fitOf('orthodont', 'REML');
		const rule = precisionRule(fit, 'naive');
		expect(() => testContrast(fit, rule, [1, 2], 0.95)).toThrow(
			expect.objectContaining({ code: 'shape-mismatch' })
		);
		expect(() => testContrast(fit, rule, [0, 0, 0, 0], 0.95)).toThrow(
			expect.objectContaining({ code: 'bad-option' })
		);
	});
});
