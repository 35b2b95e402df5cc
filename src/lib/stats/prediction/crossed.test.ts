import { Matrix, inverse as invert } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import { subjectInfluence } from '../diagnostics/influence.js';
import { normaliser } from '../diagnostics/normalised.js';
import { fitPrepared } from '../fit/fit-model.js';
import { prepareModel } from '../fit/prepare-model.js';
import { drawMissing } from '../missing/impute.js';
import { randomStream } from '../numeric/random.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { firstSubjects, referenceDesign } from '../reference/reference-design.js';
import { referenceModels } from '../reference/reference-fits.js';
import { inverseCovariance } from './inverse-covariance.js';
import { subjectEffects, visitEffects } from './subject-effects.js';

/**
 * Unbalanced data (2 to 4 rows for each subject) with level, slope and effects of visits shared by all, every quantity against
 * matrices over all rows: in balanced data what visits did cancels from much of it.
 */
const design = firstSubjects(
	referenceDesign('btheb', ['(Intercept)', 'time', 'arm', 'time:arm']),
	24
);
const random = randomStream(77);
const moves = design.visits.map(() => 5 * random.normal());
design.y = design.y.map((y, i) => y + moves[design.visit[i]!]!);
const fit = fitPrepared(prepareModel(design, referenceModels.M6!), { method: 'reml' });
const { n, p } = design;
const value = (name: string) => fit.parameters.find((v) => v.name === name)!.value;
const g = new Matrix([
	[value('subject level'), value('level–slope covariance')],
	[value('level–slope covariance'), value('subject slope')]
]);
const subject = new Int32Array(n);
design.subjects.forEach((_, s) =>
	subject.fill(s, design.subjectStart[s], design.subjectStart[s + 1])
);
const v = new Matrix(n, n);
for (let i = 0; i < n; i++)
	for (let j = 0; j < n; j++) {
		const z = (k: number) => new Matrix([[1, design.time[k]!]]);
		let entry = i === j ? value('residual') : 0;
		if (subject[i] === subject[j]) entry += z(i).mmul(g).mmul(z(j).transpose()).get(0, 0);
		if (design.visit[i] === design.visit[j]) entry += value('visit');
		v.set(i, j, entry);
	}
const w = invert(v);
const x = new Matrix(n, p);
for (let j = 0; j < p; j++) for (let i = 0; i < n; i++) x.set(i, j, design.x[j * n + i]!);
const y = Matrix.columnVector([...design.y]);
const spread = invert(x.transpose().mmul(w).mmul(x));
const beta = spread.mmul(x.transpose().mmul(w).mmul(y));
const r = Matrix.sub(y, x.mmul(beta));
const projector = Matrix.sub(w, w.mmul(x).mmul(spread).mmul(x.transpose()).mmul(w));

describe('subjects crossed with visits, unbalanced', () => {
	test('the data are what they are meant to be', () => {
		expect(
			new Set(design.subjects.map((_, s) => design.subjectStart[s + 1]! - design.subjectStart[s]!))
				.size
		).toBeGreaterThan(1);
		expect(value('visit')).toBeGreaterThan(1);
		beta.getColumn(0).forEach((b, j) => expectWithin(fit.beta[j]!, b, 1e-7 * fit.se[j]!));
	});

	test('V⁻¹ on residuals', () => {
		const { weighted, residual } = inverseCovariance(fit);
		const size = Math.sqrt(value('residual'));
		w.mmul(r)
			.getColumn(0)
			.forEach((e, i) => {
				expectWithin(weighted[i]!, e, 1e-7 / size);
				expectWithin(residual[i]!, r.get(i, 0), 1e-6 * size);
			});
	});

	test('effects of subjects and visits with both their standard errors', () => {
		const check = (
			ours: { estimate: number; conditionalSe: number; predictionSe: number },
			c: Matrix,
			prior: number
		) => {
			const less = (m: Matrix) => Math.sqrt(prior - c.mmul(m).mmul(c.transpose()).get(0, 0));
			expectWithin(ours.estimate, c.mmul(w).mmul(r).get(0, 0), 1e-6 * Math.sqrt(prior));
			expectRelative(ours.conditionalSe, less(w), 1e-6);
			expectRelative(ours.predictionSe, less(projector), 1e-6);
		};
		subjectEffects(fit).forEach(({ level, slope }, s) => {
			const z = new Matrix(n, 2);
			for (let i = 0; i < n; i++) if (subject[i] === s) z.setRow(i, [1, design.time[i]!]);
			const gz = g.mmul(z.transpose());
			check(level!, gz.subMatrixRow([0]), g.get(0, 0));
			check(slope!, gz.subMatrixRow([1]), g.get(1, 1));
		});
		visitEffects(fit).forEach((effect, k) => {
			const u = Matrix.rowVector([...design.visit].map((at) => (at === k ? value('visit') : 0)));
			check(effect, u, value('visit'));
		});
	});

	test('normalised residuals have r’V⁻¹r as their sum of squares', () => {
		const normalised = normaliser(fit)(Float64Array.from(r.getColumn(0)));
		expectRelative(
			normalised.reduce((sum, e) => sum + e * e, 0),
			r.transpose().mmul(w).mmul(r).get(0, 0),
			1e-8
		);
	});

	test('influence of each subject, the covariance held', () => {
		const weights = [0.5, 0, 0, 1];
		const influence = subjectInfluence(fit, [weights]);
		design.subjects.forEach((_, s) => {
			const rows = Array.from({ length: n }, (_, i) => i).filter((i) => subject[i] !== s);
			const own = x.subMatrixRow(rows);
			const less = own.transpose().mmul(invert(v.subMatrixRow(rows).subMatrixColumn(rows)));
			const rest = invert(less.mmul(own));
			const l = Matrix.rowVector(weights);
			const found = influence[s]!.contrasts[0]!;
			const se = Math.sqrt(l.mmul(rest).mmul(l.transpose()).get(0, 0));
			expectRelative(found.se, se, 1e-7);
			expectWithin(
				found.estimate,
				l.mmul(rest).mmul(less).mmul(y.subMatrixRow(rows)).get(0, 0),
				1e-6 * se
			);
		});
	});

	test('imputations have the mean and variance given every outcome observed, others’ at the visit too', () => {
		const missing = Uint8Array.from({ length: n }, (_, i) => (i % 7 === 3 ? 1 : 0));
		const all = Array.from({ length: n }, (_, i) => i);
		const [seen, lost] = [all.filter((i) => !missing[i]), all.filter((i) => missing[i])];
		const c = v.subMatrixRow(lost).subMatrixColumn(seen);
		const inside = c.mmul(invert(v.subMatrixRow(seen).subMatrixColumn(seen)));
		const centre = Matrix.add(x.mmul(beta).subMatrixRow(lost), inside.mmul(r.subMatrixRow(seen)));
		const open = Matrix.sub(v.subMatrixRow(lost).subMatrixColumn(lost), inside.mmul(c.transpose()));
		const draws = 2000;
		const { normal } = randomStream(6);
		const sums = lost.map(() => [0, 0] as [number, number]);
		let together = 0;
		for (let k = 0; k < draws; k++) {
			const drawn = drawMissing(design, missing, fit, normal);
			const off = lost.map((i, a) => drawn[i]! - centre.get(a, 0));
			off.forEach((e, a) => {
				sums[a]![0] += e / draws;
				sums[a]![1] += (e * e) / draws;
			});
			together += off.reduce((sum, e) => sum + e, 0) ** 2 / draws;
		}
		const root = Math.sqrt(draws);
		sums.forEach(([mean, square], a) => {
			const variance = open.get(a, a);
			expect(Math.abs(mean)).toBeLessThan((4 * Math.sqrt(variance)) / root);
			expect(Math.abs(square / variance - 1)).toBeLessThan((4 * Math.SQRT2) / root);
		});
		// The sum feels the visit effect that draws share.
		expect(Math.abs(together / open.sum() - 1)).toBeLessThan((4 * Math.SQRT2) / root);
	});
});
