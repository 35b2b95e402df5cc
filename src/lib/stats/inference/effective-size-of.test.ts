import { describe, expect, test } from 'vitest';
import { fitModel, summariseAt } from '../fit/fit-model.js';
import { prepareModel } from '../fit/prepare-model.js';
import { expectRelative } from '../reference/close.js';
import { referenceDesign } from '../reference/reference-design.js';
import { referenceModels } from '../reference/reference-fits.js';
import { intraclassCorrelationOf } from './components.js';
import { effectiveSizeOf } from './effective-size-of.js';

const btheb = referenceDesign('btheb', ['(Intercept)', 'baseline', 'time', 'arm', 'time:arm']);
const sleep = referenceDesign('sleepstudy', ['(Intercept)', 'time']);
const penicillin = referenceDesign('penicillin', ['(Intercept)']);
const state = { converged: true, gradient: 0, evaluations: 1, boundary: [] };

describe('effective sample size', () => {
	test('of the mean under a lasting level: Σ nᵢ / (1 + (nᵢ − 1) ICC)', () => {
		const fit = fitModel(btheb, referenceModels.M1!, { method: 'reml' });
		const icc = intraclassCorrelationOf(fit)!;
		let byHand = 0;
		for (let s = 0; s < btheb.subjects.length; s++) {
			const n = btheb.subjectStart[s + 1]! - btheb.subjectStart[s]!;
			byHand += n / (1 + (n - 1) * icc);
		}
		expectRelative(effectiveSizeOf(fit).forMean!, byHand, 1e-9);
		expect(byHand).toBeGreaterThan(97);
		expect(byHand).toBeLessThan(280);
	});

	test('is the rows when nothing depends, and the subjects when all that differs is the subject', () => {
		const alone = fitModel(btheb, referenceModels.M0!, { method: 'reml' });
		const { forMean, forContrast } = effectiveSizeOf(alone, [0, 0, 1, 0, 0]);
		expectRelative(forMean!, 280, 1e-10);
		expectRelative(forContrast!, 280, 1e-10);
		const prepared = prepareModel(btheb, referenceModels.M1!);
		const whole = summariseAt(prepared, 'reml', Float64Array.of(1e4), state);
		expectRelative(effectiveSizeOf(whole).forMean!, 97, 1e-6);
	});

	test('of a slope within subjects exceeds the rows; (1 − ICC)⁻¹ times them in balanced data', () => {
		const fit = fitModel(sleep, referenceModels.M1!, { method: 'reml' });
		const icc = intraclassCorrelationOf(fit)!;
		const { forContrast } = effectiveSizeOf(fit, [0, 1]);
		expectRelative(forContrast!, 180 / (1 - icc), 1e-9);
		expect(forContrast!).toBeGreaterThan(180);
	});

	test('of the mean with shared visit effects may fall below the number of subjects', () => {
		const fit = fitModel(penicillin, referenceModels.M5!, { method: 'reml' });
		const { forMean } = effectiveSizeOf(fit);
		expect(forMean!).toBeLessThan(24);
		// Balanced: the mean's variance is τ²/24 + visit/6 + σ²/144.
		const [level, visit, residual] = fit.parameters.map((p) => p.value);
		const total = level! + visit! + residual!;
		expectRelative(forMean!, total / (level! / 24 + visit! / 6 + residual! / 144), 1e-9);
	});

	test('wrong weights are refused', () => {
		const fit = fitModel(sleep, referenceModels.M1!, { method: 'reml' });
		expect(() => effectiveSizeOf(fit, [1])).toThrow(
			expect.objectContaining({ code: 'shape-mismatch' })
		);
	});
});
