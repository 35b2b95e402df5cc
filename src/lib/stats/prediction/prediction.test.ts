import { describe, expect, test } from 'vitest';
import { buildDesign } from '../design/design.js';
import { fitMixed } from '../fit/fit-mixed.js';
import { precisionRule } from '../inference/degrees-of-freedom.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { expectedValues, referenceRows, referenceSpecs } from '../reference/load.js';
import { averageCovariates, fittedLines } from './lines.js';
import { residualPoints } from './residuals.js';
import { subjectEffects } from './subject-effects.js';
import { trajectories } from './trajectories.js';

/** Outside values: reference/README.md. The values subject by subject are held in reference/agreement.test.ts. */
describe('fitted lines', () => {
	test('sleepstudy: the mean at nine days and its limits agree with the reference contrast', () => {
		const design = buildDesign(referenceRows('sleepstudy'), referenceSpecs.sleepstudy);
		const fit = fitMixed(design, { method: 'REML', randomIntercept: true });
		const expected = expectedValues('sleepstudy').fits['M1.REML'].contrasts.mean_at_time_9!;
		const [line] = fittedLines(fit, precisionRule(fit, 'kenward-roger'), 0.95);
		expect(line!.group).toBeNull();
		expect(line!.points.length).toBe(25);
		expect(line!.points[0]!.time).toBe(0);
		const last = line!.points.at(-1)!;
		expect(last.time).toBe(9);
		expectWithin(last.estimate, expected.estimate, 1e-5 * expected.se);
		expectWithin(last.lower, expected.kr!.ci_lower, 1e-5 * expected.se);
		expectWithin(last.upper, expected.kr!.ci_upper, 1e-5 * expected.se);
	});

	test('orthodont: the gap between the lines at age 14 is the reference contrast', () => {
		const design = buildDesign(referenceRows('orthodont'), referenceSpecs.orthodont);
		const fit = fitMixed(design, { method: 'REML', randomIntercept: true });
		const [boys, girls] = fittedLines(fit, precisionRule(fit, 'satterthwaite'), 0.95, [6]);
		expect([boys!.group, girls!.group]).toEqual(['0', '1']);
		const expected =
			expectedValues('orthodont').fits['M1.REML'].contrasts.arm_difference_at_time_6!;
		expectWithin(
			girls!.points[0]!.estimate - boys!.points[0]!.estimate,
			expected.estimate,
			1e-5 * expected.se
		);
	});

	test('covariates are held at their average over subjects, not over rows', () => {
		const rows = referenceRows('btheb');
		const design = buildDesign(rows, referenceSpecs.btheb);
		const bySubject = new Map(rows.map((r) => [r.subject, r.covariates!.baseline as number]));
		const average = [...bySubject.values()].reduce((a, b) => a + b) / bySubject.size;
		expectRelative(averageCovariates(design)[0]!.value, average, 1e-12);
		const fit = fitMixed(design, { method: 'REML', randomIntercept: true });
		const [usual] = fittedLines(fit, precisionRule(fit, 'naive'), 0.95, [3]);
		const beta = (name: string) => fit.beta[design.names.indexOf(name)]!;
		expectRelative(
			usual!.points[0]!.estimate,
			beta('intercept') + 3 * beta('time') + average * beta('baseline'),
			1e-10
		);
	});
});

describe('subjects', () => {
	const design = buildDesign([...referenceRows('btheb')].reverse(), referenceSpecs.btheb);
	const fit = fitMixed(design, { method: 'REML', randomIntercept: true });

	test('trajectories carry the caller’s labels, times in order, and fitted values with the offset', () => {
		const effects = subjectEffects(fit);
		const all = trajectories(design, residualPoints(fit, effects), effects);
		expect(all.length).toBe(97);
		for (const one of all) {
			expect(one.label).toBe(design.subjects[one.subject]);
			const times = one.points.map((p) => p.time);
			expect(times).toEqual([...times].sort((a, b) => a - b));
			expect(one.effect).toEqual(effects[one.subject]);
		}
		const known = referenceRows('btheb').filter((r) => r.subject === 'S004');
		const drawn = all.find((one) => one.label === 'S004')!;
		expect(drawn.points.map((p) => p.outcome)).toEqual(known.map((r) => r.outcome));
		expect(drawn.group).toBe(known[0]!.group);
	});

	test('an offset is refused of a model without one, and residuals are then of one kind', () => {
		const plain = fitMixed(design, { method: 'REML', randomIntercept: false });
		expect(() => subjectEffects(plain)).toThrow(
			expect.objectContaining({ code: 'no-subject-effect' })
		);
		for (const point of residualPoints(plain, null)) expect(point.conditional).toBe(point.marginal);
	});
});
