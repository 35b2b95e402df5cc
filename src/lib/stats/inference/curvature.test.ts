import { Matrix, inverse } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import { occasionsOf } from '../dependence/occasions.js';
import { summariseAt } from '../fit/fit-model.js';
import { prepareModel } from '../fit/prepare-model.js';
import { layoutOf } from '../dependence/layout.js';
import type { Dependence } from '../plan.js';
import { expectWithin } from '../reference/close.js';
import { firstSubjects, referenceDesign } from '../reference/reference-design.js';
import { covarianceFrom, curvatureAt } from './fit-curvature.js';
import { precisionOf } from './precision.js';

const design = firstSubjects(
	referenceDesign('btheb', ['(Intercept)', 'baseline', 'time', 'arm', 'time:arm']),
	24
);

const model = (
	subjectEffects: Dependence['subjectEffects'],
	visitEffects: boolean,
	structure: Dependence['errors']['structure'],
	varianceBy: Dependence['errors']['varianceBy'] = 'none',
	along: 'time' | 'visit' = 'time'
): Dependence => ({ subjectEffects, visitEffects, errors: { structure, along, varianceBy } });

const models: Dependence[] = [
	model('level', true, 'independent'),
	model('level-and-slope', true, 'independent'),
	model('level', true, 'serial'),
	model('none', true, 'serial-with-noise', 'group'),
	model('slope', true, 'toeplitz', 'visit'),
	model('none', true, 'unstructured'),
	model('level', false, 'serial-with-noise', 'visit', 'visit'),
	model('level-and-slope-uncorrelated', false, 'serial'),
	model('none', false, 'compound-symmetry', 'group')
];

/** The same in n × n matrices written out in full, sharing no step but the derivatives of one subject's block. */
function writtenOut(fit: ReturnType<typeof summariseAt>) {
	const { prepared, natural } = fit;
	const { n, p } = design;
	const count = natural.blocks.length + (natural.visit >= 0 ? 1 : 0);
	const v = Matrix.zeros(n, n);
	const first = Array.from({ length: count }, () => Matrix.zeros(n, n));
	const second = new Map<string, Matrix>();
	const place = (to: Matrix, from: number, size: number, block: Float64Array) => {
		for (let i = 0; i < size; i++)
			for (let j = 0; j < size; j++)
				if (block.length > 0) to.set(from + i, from + j, block[i * size + j]!);
	};
	for (let s = 0; s < design.subjects.length; s++) {
		const from = design.subjectStart[s]!;
		const size = design.subjectStart[s + 1]! - from;
		const at = natural.at(occasionsOf(design, prepared.layout, s));
		place(v, from, size, at.v);
		at.first.forEach((m, k) => place(first[k]!, from, size, m));
		for (const { k, l, matrix } of at.second)
			for (const key of new Set([`${k},${l}`, `${l},${k}`])) {
				if (!second.has(key)) second.set(key, Matrix.zeros(n, n));
				place(second.get(key)!, from, size, matrix);
			}
	}
	if (natural.visitRatio > 0)
		for (let i = 0; i < n; i++)
			for (let j = 0; j < n; j++)
				if (design.visit[i] === design.visit[j]) {
					v.set(i, j, v.get(i, j) + natural.visitRatio);
					if (natural.visit >= 0) first[count - 1]!.set(i, j, 1);
				}
	const x = new Matrix(n, p);
	for (let i = 0; i < n; i++) for (let j = 0; j < p; j++) x.set(i, j, design.x[j * n + i]!);
	const vi = inverse(v);
	const c = inverse(x.transpose().mmul(vi).mmul(x));
	const y = Matrix.columnVector(design.y);
	const r = y
		.clone()
		.sub(x.mmul(c).mmul(x.transpose().mmul(vi).mmul(y)))
		.div(Math.sqrt(fit.scale));
	const vr = vi.mmul(r);
	const pm = vi.clone().sub(vi.mmul(x).mmul(c).mmul(x.transpose()).mmul(vi));
	const pd = first.map((d) => pm.mmul(d));
	const trace = (a: Matrix, b: Matrix) => {
		let sum = 0;
		for (let i = 0; i < n; i++) for (let j = 0; j < n; j++) sum += a.get(i, j) * b.get(j, i);
		return sum;
	};
	const form = (a: Matrix, m: Matrix, b: Matrix) => a.transpose().mmul(m).mmul(b).get(0, 0);
	const slope = first.map((d, k) => pd[k]!.trace() - form(vr, d, vr));
	const expected = first.map((_, k) => first.map((__, l) => trace(pd[k]!, pd[l]!)));
	const observed = first.map((d, k) =>
		first.map((e, l) => {
			const bend = second.get(`${k},${l}`);
			let value = -expected[k]![l]! + 2 * form(vr, d.mmul(pm).mmul(e), vr);
			if (bend) value += trace(pm, bend) - form(vr, bend, vr);
			return value;
		})
	);
	const w = covarianceFrom(Float64Array.from(expected.flat()), count);
	const vx = vi.mmul(x);
	const middle = Matrix.zeros(p, p);
	for (let k = 0; k < count; k++)
		for (let l = 0; l < count; l++) {
			const pk = vx.transpose().mmul(first[k]!).mmul(vx);
			const pl = vx.transpose().mmul(first[l]!).mmul(vx);
			const q = vx.transpose().mmul(first[k]!).mmul(vi).mmul(first[l]!).mmul(vx);
			const bend = second.get(`${k},${l}`);
			const term = q.sub(pk.mmul(c).mmul(pl));
			if (bend) term.sub(vx.transpose().mmul(bend).mmul(vx).div(4));
			middle.add(term.mul(w[k * count + l]!));
		}
	const adjusted = c.clone().add(c.mmul(middle).mmul(c).mul(2)).mul(fit.scale);
	return { slope, expected, observed, adjusted };
}

describe('curvature at an arbitrary point is that of matrices written out in full', () => {
	test.each(models.map((d) => [JSON.stringify(d), d] as const))('%s', (_, dependence) => {
		const prepared = prepareModel(design, dependence);
		const layout = layoutOf(design, dependence);
		const x = Float64Array.from({ length: layout.count }, (_, i) => {
			if (dependence.errors.structure === 'unstructured' && i >= layout.shape)
				return [0.5, 0.9, 0.4, 0.3, 0.8, 0.2, 0.3, 0.4, 0.7][i - layout.shape]!;
			return 0.35 + 0.1 * i;
		});
		const fit = summariseAt(prepared, 'reml', x, {
			converged: true,
			gradient: 0,
			evaluations: 1,
			boundary: []
		});
		const ours = curvatureAt(fit);
		const theirs = writtenOut(fit);
		const { count } = ours.sums;
		expect(theirs.slope.length).toBe(count);
		theirs.slope.forEach((v, k) => {
			const size = Math.sqrt(theirs.expected[k]![k]!);
			expectWithin(ours.slope[k]!, v, 1e-8 * size * 10);
			theirs.expected[k]!.forEach((e, l) => {
				const both = size * Math.sqrt(theirs.expected[l]![l]!);
				expectWithin(ours.expected[k * count + l]!, e, 1e-9 * both, 'expected');
				expectWithin(
					ours.observed[k * count + l]!,
					theirs.observed[k]![l]!,
					1e-8 * both,
					'observed'
				);
			});
		});
		const precision = precisionOf(fit, 'kenward-roger');
		for (let i = 0; i < design.p; i++)
			for (let j = 0; j < design.p; j++)
				expectWithin(
					precision.covariance[i]![j]!,
					theirs.adjusted.get(i, j),
					1e-8 * Math.sqrt(theirs.adjusted.get(i, i) * theirs.adjusted.get(j, j))
				);
	});
});
