import { Matrix, inverse as invert } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import { fitPrepared, type ModelFit } from '../fit/fit-model.js';
import { prepareModel, withOutcome } from '../fit/prepare-model.js';
import { outcomeDrawer } from '../fit/subject-view.js';
import { randomStream } from '../numeric/random.js';
import { subjectSystems } from '../prediction/inverse-covariance.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { referenceDesign, type ReferenceSet } from '../reference/reference-design.js';
import { referenceFits, referenceModels } from '../reference/reference-fits.js';
import { subjectInfluence } from './influence.js';
import { normaliser } from './normalised.js';
import { quantilePlot } from './quantile-plot.js';
import { residualsOf } from './residuals.js';
import { semivariogram } from './semivariogram.js';

function fitOf(set: ReferenceSet, key: string): ModelFit {
	const design = referenceDesign(set, referenceFits(set).fits[`${key}.REML`]!.coef_names);
	return fitPrepared(prepareModel(design, referenceModels[key]!), { method: 'reml' });
}

/** V written out over all rows. */
function wholeCovariance(fit: ModelFit): Matrix {
	const { design } = fit.prepared;
	const v = Matrix.zeros(design.n, design.n);
	const system = subjectSystems(fit);
	design.subjects.forEach((_, s) => {
		const { from, n, covariance } = system(s);
		for (let i = 0; i < n; i++)
			for (let j = 0; j < n; j++) v.set(from + i, from + j, covariance[i * n + j]!);
	});
	const shared = fit.natural.visitRatio * fit.scale;
	for (let i = 0; i < design.n; i++)
		for (let j = 0; j < design.n; j++)
			if (shared > 0 && design.visit[i] === design.visit[j]) v.set(i, j, v.get(i, j) + shared);
	return v;
}

const cases: [ReferenceSet, string][] = [
	['orthodont', 'M2'],
	['btheb', 'M3n'],
	['sleepstudy', 'M4'],
	['penicillin', 'M5'],
	['orthodont', 'M7_cat'],
	['orthodont', 'M8toeph_cat']
];

describe.each(cases)('%s, %s', (set, key) => {
	const fit = fitOf(set, key);
	const { design } = fit.prepared;
	const v = wholeCovariance(fit);

	test('normalised residuals are freed of the whole covariance: NVN’ is the identity', () => {
		const normalise = normaliser(fit);
		const whitened = new Matrix(design.n, design.n);
		for (let j = 0; j < design.n; j++)
			whitened.setColumn(j, [...normalise(Float64Array.from(v.getColumn(j)))]);
		for (let i = 0; i < design.n; i++)
			whitened.setRow(i, [...normalise(Float64Array.from(whitened.getRow(i)))]);
		for (let i = 0; i < design.n; i++)
			for (let j = 0; j < design.n; j++) expectWithin(whitened.get(i, j), i === j ? 1 : 0, 1e-8);
		const { normalised, marginal } = residualsOf(fit);
		expect([...normalised]).toEqual([...normalise(marginal)]);
	});

	test('influence is that of a refit without the subject, its covariance held', () => {
		const weights = design.names.map((_, j) => (j === design.p - 1 ? 1 : j === 0 ? 0.5 : 0));
		const influence = subjectInfluence(fit, [weights]);
		const x = new Matrix(design.n, design.p);
		for (let j = 0; j < design.p; j++)
			for (let i = 0; i < design.n; i++) x.set(i, j, design.x[j * design.n + i]!);
		const y = Matrix.columnVector([...design.y]);
		const l = Matrix.rowVector(weights);
		const fitted = (rows: number[]) => {
			const all = design.names.map((_, j) => j);
			const w = invert(v.subMatrixRow(rows).subMatrixColumn(rows));
			const own = x.selection(rows, all);
			const spread = invert(own.transpose().mmul(w).mmul(own));
			const beta = spread.mmul(
				own
					.transpose()
					.mmul(w)
					.mmul(y.selection(rows, [0]))
			);
			return { beta, spread };
		};
		const rows = Array.from({ length: design.n }, (_, i) => i);
		const whole = fitted(rows);
		for (const s of [0, 3, design.subjects.length - 1]) {
			const [from, to] = [design.subjectStart[s]!, design.subjectStart[s + 1]!];
			const rest = fitted(rows.filter((i) => i < from || i >= to));
			const { contrasts, distance, subject } = influence[s]!;
			expect(subject).toBe(design.subjects[s]);
			const se = Math.sqrt(l.mmul(whole.spread).mmul(l.transpose()).get(0, 0));
			const estimate = l.mmul(rest.beta).get(0, 0);
			expectWithin(contrasts[0]!.estimate, estimate, 1e-6 * se);
			expectWithin(contrasts[0]!.shift, (estimate - l.mmul(whole.beta).get(0, 0)) / se, 1e-6);
			expectRelative(
				contrasts[0]!.se,
				Math.sqrt(l.mmul(rest.spread).mmul(l.transpose()).get(0, 0)),
				1e-7
			);
			const change = Matrix.sub(rest.beta, whole.beta);
			expectRelative(
				distance!,
				change.transpose().mmul(invert(whole.spread)).mmul(change).get(0, 0) / design.p,
				1e-5
			);
		}
	});

	test('the semivariogram is that of every pair, counted one by one', () => {
		const { within, between, subjectsLeftOut } = semivariogram(fit, 1000);
		const { marginal } = residualsOf(fit);
		const subject = new Int32Array(design.n);
		design.subjects.forEach((_, s) =>
			subject.fill(s, design.subjectStart[s], design.subjectStart[s + 1])
		);
		const byLag = new Map<number, { pairs: number; observed: number; model: number }>();
		const others = { pairs: 0, observed: 0, model: 0 };
		for (let i = 0; i < design.n; i++)
			for (let j = 0; j < i; j++) {
				const lag = Math.abs(design.time[i]! - design.time[j]!);
				if (subject[i] === subject[j] && !byLag.has(lag))
					byLag.set(lag, { pairs: 0, observed: 0, model: 0 });
				const one = subject[i] === subject[j] ? byLag.get(lag)! : others;
				one.pairs++;
				one.observed += (marginal[i]! - marginal[j]!) ** 2 / 2;
				one.model += (v.get(i, i) + v.get(j, j)) / 2 - v.get(i, j);
			}
		expect(subjectsLeftOut).toBe(0);
		expect(within.map((b) => b.lag)).toEqual([...byLag.keys()].sort((a, b) => a - b));
		for (const bin of within) {
			const e = byLag.get(bin.lag)!;
			expect(bin.pairs).toBe(e.pairs);
			expectWithin(bin.observed, e.observed / e.pairs, 1e-9 * between!.observed);
			expectWithin(bin.model, e.model / e.pairs, 1e-9 * between!.observed);
		}
		expect(between!.pairs).toBe(others.pairs);
		expectRelative(between!.observed, others.observed / others.pairs, 1e-9);
		expectRelative(between!.model, others.model / others.pairs, 1e-9);
		expect(semivariogram(fit, 3).within.length).toBeLessThanOrEqual(3);
	});
});

describe('the Q–Q plot', () => {
	const fit = fitOf('orthodont', 'M2');
	const drawn = (spoil: (y: Float64Array) => void) => {
		const y = outcomeDrawer(fit)(randomStream(5).normal);
		spoil(y);
		const again = fitPrepared(withOutcome(fit.prepared, y), { method: 'reml' });
		return quantilePlot(again, { seed: 1, simulations: 99 });
	};

	test('rises along normal quantiles, each point within its limits as often as said when the model is right', () => {
		const { points, outside } = drawn(() => {});
		expect(outside).toBeLessThan(0.15);
		expect(points.length).toBe(108);
		for (const name of ['expected', 'observed', 'lower', 'upper'] as const) {
			const values = points.map((p) => p[name]);
			expect(values).toEqual([...values].sort((a, b) => a - b));
		}
		expect(new Set(points.map((p) => p.row)).size).toBe(108);
		expectWithin(points[0]!.expected, -2.6022, 5e-4);
	});

	test('leaves its limits when errors have heavy tails', () => {
		const spoilt = drawn((y) => {
			for (let i = 0; i < y.length; i += 9) y[i]! += (i % 2 ? -1 : 1) * 15;
		});
		expect(spoilt.outside).toBeGreaterThan(0.3);
	});

	test('is the same for the same seed, and stops when asked', () => {
		const options = { seed: 3, simulations: 19 };
		expect(quantilePlot(fit, options)).toEqual(quantilePlot(fit, options));
		let asked = 0;
		expect(() => quantilePlot(fit, { ...options, shouldStop: () => ++asked > 4 })).toThrow(
			expect.objectContaining({ code: 'stopped' })
		);
		expect(() => quantilePlot(fit, { seed: 3, simulations: 5 })).toThrow(/at least 19/);
	});
});

describe('edges', () => {
	test('a subject without whom a coefficient is undetermined has no influence in numbers', () => {
		const whole = fitOf('orthodont', 'M1');
		const { design } = whole.prepared;
		const x = Float64Array.from({ length: design.n * 5 }, (_, at) =>
			at < design.n * 4 ? design.x[at]! : at - design.n * 4 < design.subjectStart[1]! ? 1 : 0
		);
		const only = { ...design, x, p: 5, names: [...design.names, 'the first'] };
		const fit = fitPrepared(prepareModel(only, whole.dependence), { method: 'reml' });
		const [first, second] = subjectInfluence(fit, [[0, 1, 0, 0, 0]]);
		expect(first).toEqual({ subject: design.subjects[0], distance: null, contrasts: [null] });
		expect(second!.distance).toBeGreaterThan(0);
	});

	test('weights of the wrong length and no bins are refused', () => {
		const fit = fitOf('orthodont', 'M1');
		expect(() => subjectInfluence(fit, [[1]])).toThrow(/1 weights for 4 coefficients/);
		expect(() => semivariogram(fit, 0)).toThrow(/0 bins/);
	});
});
