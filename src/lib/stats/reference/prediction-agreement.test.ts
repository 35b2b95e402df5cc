import { readFileSync } from 'node:fs';
import { describe, expect, test } from 'vitest';
import { fitPrepared } from '../fit/fit-model.js';
import { prepareModel } from '../fit/prepare-model.js';
import type { FitMethod } from '../plan.js';
import { fittedRows } from '../prediction/conditional-fit.js';
import { inverseCovariance } from '../prediction/inverse-covariance.js';
import { subjectEffects, visitEffects } from '../prediction/subject-effects.js';
import { expectRelative, expectWithin } from './close.js';
import { referenceDesign, type ReferenceSet } from './reference-design.js';
import { referenceFits, referenceModels } from './reference-fits.js';

interface Predictions {
	blups?: { subject: string; blup: number[]; conditional_se: number[]; prediction_se: number[] }[];
	blups_long?: { group: string; term: string; level: string; blup: number; conditional_se: number }[];
	marginal_residuals: number[];
	conditional_residuals?: number[];
}

/** Values and tolerances: README.md beside this file. */
const all = JSON.parse(
	readFileSync(new URL('./predictions.json', import.meta.url), 'utf8')
) as Record<ReferenceSet, Record<string, Predictions>>;
const cases = Object.entries(all).flatMap(([set, models]) =>
	Object.entries(models)
		// Where the collection's optimiser stopped short; see engine-agreement.test.ts.
		.filter(([key]) => !(key.startsWith('M4n') && (set === 'orthodont' || set === 'btheb')))
		.map(([key, expected]) => ({ set: set as ReferenceSet, key, expected }))
);

test('there is something to compare for every kind of dependence', () => {
	expect(cases.length).toBeGreaterThan(45);
	expect(cases.filter((c) => c.expected.blups).length).toBeGreaterThan(12);
	expect(cases.filter((c) => c.expected.blups_long).length).toBe(7);
});

describe.each(cases)('$set, $key', ({ set, key, expected }) => {
	const [model, method] = key.split('.') as [string, string];
	const source = referenceFits(set).fits[key]!;
	const design = referenceDesign(set, source.coef_names);
	const fit = fitPrepared(prepareModel(design, referenceModels[model]!), {
		method: method.toLowerCase() as FitMethod
	});
	const inverse = inverseCovariance(fit);
	// Fits at an edge stopped somewhere near it in the source.
	const near = source.singular ? 1e-4 : 1e-5;

	test('residuals agree row by row', () => {
		const rows = fittedRows(fit, inverse);
		const mean = [...rows.marginal].reduce((sum, r) => sum + r * r, 0) / design.n;
		const tolerance = near * Math.sqrt(mean);
		design.rowOf.forEach((row, i) => {
			expectWithin(rows.marginal[i]!, expected.marginal_residuals[row]!, tolerance);
			expectWithin(rows.marginal[i]! + rows.marginalFitted[i]!, design.y[i]!, 1e-9 * (1 + Math.abs(design.y[i]!)));
			if (expected.conditional_residuals) {
				expectWithin(rows.conditional[i]!, expected.conditional_residuals[row]!, tolerance);
				expectWithin(rows.conditional[i]! + rows.fitted[i]!, design.y[i]!, 1e-9 * (1 + Math.abs(design.y[i]!)));
			}
		});
	});

	if (expected.blups)
		test('subject effects and both their standard errors agree', () => {
			const theirs = new Map(expected.blups!.map((b) => [b.subject, b]));
			expect(theirs.size).toBe(design.subjects.length);
			for (const ours of subjectEffects(fit, inverse)) {
				const e = theirs.get(ours.subject)!;
				[ours.level!, ours.slope].slice(0, e.blup.length).forEach((one, k) => {
					const se = e.prediction_se[k]!;
					expectWithin(one!.estimate, e.blup[k]!, near * se, ours.subject);
					expectRelative(one!.conditionalSe, e.conditional_se[k]!, near, ours.subject);
					expectRelative(one!.predictionSe, se, near, ours.subject);
				});
			}
		});

	if (expected.blups_long)
		test('effects of subjects and of visits agree', () => {
			const subjects = new Map(subjectEffects(fit, inverse).map((s) => [s.subject, s]));
			const visits = new Map(visitEffects(fit, inverse).map((v) => [v.visit, v]));
			for (const e of expected.blups_long!) {
				const subject = subjects.get(e.level);
				const ours =
					e.group === 'subject'
						? e.term === '(Intercept)'
							? subject!.level!
							: subject!.slope!
						: visits.get(e.level)!;
				expectWithin(ours.estimate, e.blup, Math.max(near * e.conditional_se, 1e-9), e.level);
				expectWithin(ours.conditionalSe, e.conditional_se, near * Math.max(e.conditional_se, 1e-6), e.level);
			}
		});
});
