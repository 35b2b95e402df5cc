import { describe, expect, test } from 'vitest';
import {
	buildDesign,
	fitMixed,
	intraclassCorrelation,
	marginalResiduals,
	precisionRule,
	residualPoints,
	subjectEffects,
	testContrast,
	type DegreesOfFreedom,
	type Method,
	type TestedEstimate
} from '../index.js';
import { covarianceOfCoefficients } from '../numeric/orthonormal.js';
import { observedCovariance } from '../inference/information.js';
import { expectRelative, expectWithin } from './close.js';
import {
	expectedValues,
	ourName,
	referenceRows,
	referenceSpecs,
	type DataSet,
	type ExpectedDf,
	type ExpectedTest
} from './load.js';

/** Values and tolerances: README.md beside this file. */
const sets: DataSet[] = ['orthodont', 'sleepstudy', 'btheb'];
const models = (['M0', 'M1'] as const).flatMap((model) =>
	(['REML', 'ML'] as const).map((method) => ({ model, method }))
);
const cases = sets.flatMap((set) => models.map((m) => ({ set, ...m })));

function setUp(set: DataSet, model: 'M0' | 'M1', method: Method) {
	const design = buildDesign(referenceRows(set), referenceSpecs[set]);
	const fit = fitMixed(design, { method, randomIntercept: model === 'M1' });
	const expected = expectedValues(set).fits[`${model}.${method}`];
	// Position of each of our coefficients in the order of the source.
	const order = design.names.map((name) =>
		expected.coef_names.findIndex((theirs) => ourName(theirs) === name)
	);
	const inOurOrder = (row: number[]) => order.map((k) => row[k]!);
	return { design, fit, expected, order, inOurOrder };
}

function expectCovariance(
	actual: number[][],
	expected: number[][],
	inOurOrder: (row: number[]) => number[]
) {
	const theirs = inOurOrder(expected.map((_, i) => i)).map((i) => inOurOrder(expected[i]!));
	actual.forEach((row, i) =>
		row.forEach((v, j) =>
			expectWithin(v, theirs[i]![j]!, 1e-5 * Math.sqrt(theirs[i]![i]! * theirs[j]![j]!))
		)
	);
}

function expectTest(
	actual: TestedEstimate,
	expected: ExpectedTest,
	df: ExpectedDf,
	dfTolerance: number
) {
	const se = df.se ?? expected.se;
	expectWithin(actual.estimate, expected.estimate, 1e-5 * se, 'estimate');
	expectRelative(actual.standardError, se, 1e-5, 'standard error');
	expectRelative(actual.df, df.df, dfTolerance, 'df');
	expectWithin(actual.t, df.t, 1e-5 * (1 + Math.abs(df.t)), 't');
	expectRelative(actual.p, df.p, 1e-4, 'p');
	expectWithin(actual.lower, df.ci_lower, 10 * dfTolerance * se, 'lower');
	expectWithin(actual.upper, df.ci_upper, 10 * dfTolerance * se, 'upper');
}

describe.each(cases)('$set, $model by $method', ({ set, model, method }) => {
	const { design, fit, expected, inOurOrder } = setUp(set, model, method);

	test('coefficients, standard errors and covariance agree', () => {
		expect(design.names.length).toBe(expected.coef_names.length);
		expect(design.names).toEqual(inOurOrder([...expected.coef_names.keys()]).map((k) => ourName(expected.coef_names[k]!)));
		inOurOrder([...expected.coef_names.keys()]).forEach((k, j) => {
			const theirs = expected.coef_names[k]!;
			expectWithin(fit.beta[j]!, expected.beta[theirs]!, 1e-5 * expected.se[theirs]!, theirs);
			expectRelative(fit.se[j]!, expected.se[theirs]!, 1e-5, theirs);
		});
		expectCovariance(fit.vcov, expected.vcov_beta, inOurOrder);
	});

	test('variance components, their covariance and the ICC agree', () => {
		const { tau2_intercept, sigma2 } = expected.varcomp;
		expectRelative(fit.varianceComponents.residual, sigma2, 1e-5, 'residual');
		if (tau2_intercept === undefined) {
			expect(fit.varianceComponents.subject).toBeNull();
			expect(intraclassCorrelation(fit)).toBeNull();
		} else {
			expectRelative(fit.varianceComponents.subject!, tau2_intercept, 1e-5, 'subject');
			expectRelative(intraclassCorrelation(fit)!, expected.derived!.icc_subject, 1e-5, 'ICC');
		}
		// Numerical second derivatives in the source: 1e-4 as for the degrees of freedom made from them.
		const theirs = expected.cov_varcomp_observed_information;
		observedCovariance(fit.curvature, method)
			.to2DArray()
			.forEach((row, i) =>
				row.forEach((v, j) =>
					expectWithin(v, theirs[i]![j]!, 1e-4 * Math.sqrt(theirs[i]![i]! * theirs[j]![j]!))
				)
			);
	});

	test('log-likelihood, AIC and BIC agree and the fit says it converged', () => {
		expectWithin(fit.logLikelihood, expected.logLik, 1e-6);
		expect(fit.criteria.parameters).toBe(expected.n_parameters);
		expectWithin(fit.criteria.aic, expected.AIC, 2e-6);
		expectWithin(fit.criteria.bicRows, expected.BIC_n_obs, 2e-6);
		expectWithin(fit.criteria.bicRowsMinusCoefficients, expected.BIC_n_obs_minus_p, 2e-6);
		expectWithin(fit.criteria.bicSubjects, expected.BIC_n_subjects, 2e-6);
		expect(fit).toMatchObject({ converged: true, boundary: false });
		expect(fit.gradient).toBeLessThan(1e-8);
	});

	const rules: DegreesOfFreedom[] =
		method === 'REML' ? ['satterthwaite', 'kenward-roger'] : ['satterthwaite'];
	test.each(rules)('%s tests and intervals of coefficients and contrasts agree', (kind) => {
		const rule = precisionRule(fit, kind);
		const tolerance = kind === 'kenward-roger' ? 1e-5 : 1e-4;
		const dfOf = (e: ExpectedTest) => (kind === 'kenward-roger' ? e.kr! : e.satterthwaite);
		for (const [theirs, e] of Object.entries(expected.coef_tests)) {
			const weights = design.names.map((name) => (name === ourName(theirs) ? 1 : 0));
			expectTest(testContrast(fit, rule, weights, 0.95), e, dfOf(e), tolerance);
		}
		const contrasts = Object.values(expected.contrasts);
		expect(contrasts.length).toBeGreaterThan(0);
		for (const e of contrasts) {
			expectTest(testContrast(fit, rule, inOurOrder(e.L), 0.95), e, dfOf(e), tolerance);
		}
	});
});

describe.each(sets)('%s, random intercept by REML', (set) => {
	const { design, fit, expected, inOurOrder } = setUp(set, 'M1', 'REML');

	test('the adjusted covariance agrees, in two sources', () => {
		const rule = precisionRule(fit, 'kenward-roger');
		const adjusted = covarianceOfCoefficients(fit.products.basis, rule.covariance);
		expectCovariance(adjusted, expected.kr_vcov_beta!, inOurOrder);
		expectCovariance(adjusted, expected.pbkrtest!.vcov_adj, inOurOrder);
	});

	test('degrees of freedom agree with the packages that publish them', () => {
		const test = (kind: DegreesOfFreedom, theirs: string) =>
			testContrast(
				fit,
				precisionRule(fit, kind),
				design.names.map((name) => (name === ourName(theirs) ? 1 : 0)),
				0.95
			);
		for (const [theirs, e] of Object.entries(expected.pbkrtest!.coef)) {
			const ours = test('kenward-roger', theirs);
			expectRelative(ours.df, e.df, 1e-5, theirs);
			expectRelative(ours.standardError, e.se, 1e-5, theirs);
			expectRelative(ours.p, e.p, 1e-4, theirs);
		}
		for (const [theirs, e] of Object.entries(expected.lmerTest_satterthwaite!)) {
			const ours = test('satterthwaite', theirs);
			expectRelative(ours.df, e.df, 1e-4, theirs);
			expectRelative(ours.p, e.p, 1e-4, theirs);
		}
	});

	test('subject effects and both their standard errors agree', () => {
		const effects = subjectEffects(fit);
		const theirs = new Map(expected.blups!.map((b) => [b.subject, b]));
		expect(theirs.size).toBe(design.subjects.length);
		design.subjects.forEach((label, s) => {
			const e = theirs.get(label)!;
			const ours = effects[s]!;
			expectWithin(ours.offset, e.blup[0], 1e-5 * e.conditional_se[0], label);
			expectRelative(ours.conditionalStandardError, e.conditional_se[0], 1e-5, label);
			expectRelative(ours.predictionStandardError, e.prediction_se[0], 1e-5, label);
		});
	});

	test('fitted values and residuals agree row by row', () => {
		const points = residualPoints(fit, subjectEffects(fit));
		const tolerance = 1e-5 * Math.sqrt(fit.varianceComponents.residual);
		expect(points.length).toBe(expected.marginal_fitted!.length);
		points.forEach((point, i) => {
			expectWithin(point.marginalFitted, expected.marginal_fitted![i]!, tolerance);
			expectWithin(point.marginal, expected.marginal_residuals![i]!, tolerance);
			expectWithin(point.conditional, expected.conditional_residuals![i]!, tolerance);
			expectWithin(point.fitted + point.conditional, design.y[i]!, 1e-9);
		});
		expect([...marginalResiduals(fit)]).toEqual(points.map((point) => point.marginal));
	});
});

describe('printed values of the two textbook analyses, computed separately in R for this project', () => {
	test('sleepstudy, random intercept by REML: slope 10.467, SE 0.804, criterion 1786.47', () => {
		const { fit } = setUp('sleepstudy', 'M1', 'REML');
		expect(fit.beta[0]!.toFixed(3)).toBe('251.405');
		expect(fit.beta[1]!.toFixed(3)).toBe('10.467');
		expect(fit.se[1]!.toFixed(3)).toBe('0.804');
		expect((-2 * fit.logLikelihood).toFixed(2)).toBe('1786.47');
	});

	test('Orthodont, (age − 8) × sex, random intercept by REML, boys as reference', () => {
		const { fit } = setUp('orthodont', 'M1', 'REML');
		expect(fit.beta.map((b) => b.toFixed(4))).toEqual(['22.6156', '0.7844', '-1.4065', '-0.3048']);
		expect(fit.se.map((s) => s.toFixed(4))).toEqual(['0.5388', '0.0775', '0.8441', '0.1214']);
		expect(fit.varianceComponents.subject!.toFixed(4)).toBe('3.2986');
		expect(fit.varianceComponents.residual.toFixed(4)).toBe('1.9221');
		expect((-2 * fit.logLikelihood).toFixed(3)).toBe('433.757');
		const interaction = testContrast(fit, precisionRule(fit, 'kenward-roger'), [0, 0, 0, 1], 0.95);
		expect(interaction.df).toBeCloseTo(79, 8);
		expect(interaction.p.toFixed(5)).toBe('0.01410');
	});
});
