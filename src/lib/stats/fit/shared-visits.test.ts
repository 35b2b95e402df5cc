import { expect, test } from 'vitest';
import type { ModelDesign } from '../design/model-design.js';
import { randomStream } from '../numeric/random.js';
import type { Dependence } from '../plan.js';
import { fitModel } from './fit-model.js';
import { covarianceOf, fittedMean, visitVarianceOf } from './subject-view.js';

const [subjects, visits] = [60, 8];

/** Subjects with a lasting level, all of them moved together at each visit. */
function study(): ModelDesign {
	const random = randomStream(20261202, 0);
	const n = subjects * visits;
	const shared = Array.from({ length: visits }, () => 1.5 * random.normal());
	const y = new Float64Array(n);
	for (let s = 0; s < subjects; s++) {
		const level = 2 * random.normal();
		for (let v = 0; v < visits; v++) y[s * visits + v] = 10 + level + shared[v]! + random.normal();
	}
	return {
		n,
		p: 1,
		x: new Float64Array(n).fill(1),
		y,
		names: ['intercept'],
		time: Float64Array.from({ length: n }, (_, i) => i % visits),
		visit: Int32Array.from({ length: n }, (_, i) => i % visits),
		visits: Array.from({ length: visits }, (_, v) => `${v + 1}`),
		subjectStart: Int32Array.from({ length: subjects + 1 }, (_, s) => s * visits),
		subjects: Array.from({ length: subjects }, (_, s) => `${s}`),
		subjectGroup: new Int32Array(subjects),
		groups: [],
		rowOf: Int32Array.from({ length: n }, (_, i) => i),
		timeInMean: 'none',
		aliased: []
	};
}

const dependence = (level: boolean): Dependence => ({
	subjectEffects: level ? 'level' : 'none',
	visitEffects: true,
	errors: { structure: 'independent', along: 'time', varianceBy: 'none' }
});

/** Mean product of two residuals of one subject over their mean square. */
function alikeWithin(residuals: Float64Array): number {
	let [products, squares] = [0, 0];
	for (let s = 0; s < subjects; s++)
		for (let i = 0; i < visits; i++) {
			const here = residuals[s * visits + i]!;
			squares += here ** 2 / (subjects * visits);
			for (let j = 0; j < i; j++)
				products += (here * residuals[s * visits + j]!) / ((subjects * visits * (visits - 1)) / 2);
		}
	return products / squares;
}

/** What is left of each row when the mean, the visits' effects and the subjects' are taken away (balanced data). */
function leftOver(design: ModelDesign, level: boolean): Float64Array {
	const fit = fitModel(design, dependence(level), { method: 'reml' });
	expect(fit.converged).toBe(true);
	const mean = fittedMean(fit);
	const r = Float64Array.from(design.y, (y, i) => y - mean[i]!);
	const v = covarianceOf(fit, 0).covariance;
	const shared = visitVarianceOf(fit);
	const between = v[1]!;
	const within = v[0]! - between;
	// Balanced: each visit's and each subject's mean residual is shrunk by its own share.
	const visitShare = shared / (shared + (between + within) / subjects);
	const subjectShare = between / (between + within / visits);
	const ofVisit = Array.from({ length: visits }, (_, j) => {
		let sum = 0;
		for (let s = 0; s < subjects; s++) sum += r[s * visits + j]!;
		return sum / subjects;
	});
	const rest = r.map((value, i) => value - visitShare * ofVisit[i % visits]!);
	const ofSubject = Array.from({ length: subjects }, (_, s) => {
		let sum = 0;
		for (let j = 0; j < visits; j++) sum += rest[s * visits + j]!;
		return sum / visits;
	});
	return rest.map((value, i) => value - subjectShare * ofSubject[Math.floor(i / visits)]!);
}

test('a visit effect alone leaves subjects alike in what is left; a subject effect takes that away (common practice)', () => {
	const design = study();
	expect(alikeWithin(leftOver(design, false))).toBeGreaterThan(0.6);
	expect(Math.abs(alikeWithin(leftOver(design, true)))).toBeLessThan(0.15);
});
