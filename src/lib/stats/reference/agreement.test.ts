import { describe, expect, test } from 'vitest';
import {
	analyseGrowth,
	type DegreesOfFreedom,
	type GrowthResult,
	type Method,
	type TestedEstimate
} from '../index.js';
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

/** The growth model from rows to result. Values and tolerances: README.md beside this file. */
const sets: DataSet[] = ['orthodont', 'sleepstudy', 'btheb'];
const models = (['M0', 'M1'] as const).flatMap((model) =>
	(['REML', 'ML'] as const).map((method) => ({ model, method }))
);
const cases = sets.flatMap((set) => models.map((m) => ({ set, ...m })));

function setUp(
	set: DataSet,
	model: 'M0' | 'M1',
	method: Method,
	degreesOfFreedom: DegreesOfFreedom = 'satterthwaite'
) {
	const result = analyseGrowth(referenceRows(set), referenceSpecs[set], {
		method,
		randomIntercept: model === 'M1',
		degreesOfFreedom,
		differenceTimes: set === 'orthodont' ? [6] : [8]
	});
	const expected = expectedValues(set).fits[`${model}.${method}`];
	const names = result.coefficients.map((c) => c.name);
	// Position of each of our coefficients in the order of the source.
	const order = names.map((name) =>
		expected.coef_names.findIndex((theirs) => ourName(theirs) === name)
	);
	const inOurOrder = (row: number[]) => order.map((k) => row[k]!);
	const coefficient = (theirs: string) =>
		result.coefficients.find((c) => c.name === ourName(theirs))!;
	return { result, expected, names, inOurOrder, coefficient };
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
	const { result, expected, names, inOurOrder } = setUp(set, model, method);

	test('coefficients, standard errors and covariance agree', () => {
		expect(names.length).toBe(expected.coef_names.length);
		for (const theirs of expected.coef_names) {
			const ours = result.coefficients.find((c) => c.name === ourName(theirs))!;
			expectWithin(ours.estimate, expected.beta[theirs]!, 1e-5 * expected.se[theirs]!, theirs);
			expectRelative(ours.standardError, expected.se[theirs]!, 1e-5, theirs);
		}
		expectCovariance(result.covariance, expected.vcov_beta, inOurOrder);
	});

	test('variance components and the ICC agree', () => {
		const { tau2_intercept, sigma2 } = expected.varcomp;
		const component = (name: string) => result.varianceComponents.find((v) => v.name === name);
		expectRelative(component('residual')!.estimate, sigma2, 1e-5, 'residual');
		if (tau2_intercept === undefined) {
			expect(component('subject')).toBeUndefined();
			expect(result.icc).toBeNull();
		} else {
			expectRelative(component('subject')!.estimate, tau2_intercept, 1e-5, 'subject');
			expectRelative(result.icc!.estimate, expected.derived!.icc_subject, 1e-5, 'ICC');
		}
	});

	test('log-likelihood, AIC and BIC agree and the fit says it converged', () => {
		expectWithin(result.logLikelihood, expected.logLik, 1e-6);
		expect(result.criteria.parameters).toBe(expected.n_parameters);
		expectWithin(result.criteria.aic, expected.AIC, 2e-6);
		expectWithin(result.criteria.bicRows, expected.BIC_n_obs, 2e-6);
		expectWithin(result.criteria.bicRowsMinusCoefficients, expected.BIC_n_obs_minus_p, 2e-6);
		expectWithin(result.criteria.bicSubjects, expected.BIC_n_subjects, 2e-6);
		expect(result).toMatchObject({ converged: true, boundary: false });
		expect(result.gradient).toBeLessThan(1e-5);
	});

	const rules: DegreesOfFreedom[] =
		method === 'REML' ? ['satterthwaite', 'kenward-roger'] : ['satterthwaite'];
	test.each(rules)('%s tests and intervals of coefficients agree', (kind) => {
		const { coefficient } = setUp(set, model, method, kind);
		const tolerance = kind === 'kenward-roger' ? 1e-5 : 1e-4;
		for (const [theirs, e] of Object.entries(expected.coef_tests))
			expectTest(
				coefficient(theirs),
				e,
				kind === 'kenward-roger' ? e.kr! : e.satterthwaite,
				tolerance
			);
	});
});

describe.each(sets)('%s, random intercept by REML', (set) => {
	const { result, expected, inOurOrder, coefficient } = setUp(set, 'M1', 'REML', 'kenward-roger');

	test('the adjusted covariance agrees, in two sources', () => {
		expectCovariance(result.covariance, expected.kr_vcov_beta!, inOurOrder);
		expectCovariance(result.covariance, expected.pbkrtest!.vcov_adj, inOurOrder);
	});

	test('degrees of freedom agree with the package that publishes them', () => {
		for (const [theirs, e] of Object.entries(expected.pbkrtest!.coef)) {
			const ours = coefficient(theirs);
			expectRelative(ours.df, e.df, 1e-5, theirs);
			expectRelative(ours.standardError, e.se, 1e-5, theirs);
			expectRelative(ours.p, e.p, 1e-4, theirs);
		}
	});

	test('subject effects and both their standard errors agree', () => {
		const theirs = new Map(expected.blups!.map((b) => [b.subject, b]));
		expect(theirs.size).toBe(result.trajectories.length);
		for (const { label, effect } of result.trajectories) {
			const e = theirs.get(label)!;
			expectWithin(effect!.offset, e.blup[0], 1e-5 * e.conditional_se[0], label);
			expectRelative(effect!.conditionalStandardError, e.conditional_se[0], 1e-5, label);
			expectRelative(effect!.predictionStandardError, e.prediction_se[0], 1e-5, label);
		}
	});

	test('fitted values and residuals agree row by row', () => {
		const residual = result.varianceComponents.find((v) => v.name === 'residual')!;
		const tolerance = 1e-5 * residual.standardDeviation;
		const rows = referenceRows(set);
		expect(result.residuals.length).toBe(expected.marginal_fitted!.length);
		result.residuals.forEach((point, i) => {
			expectWithin(point.marginalFitted, expected.marginal_fitted![i]!, tolerance);
			expectWithin(point.marginal, expected.marginal_residuals![i]!, tolerance);
			expectWithin(point.conditional, expected.conditional_residuals![i]!, tolerance);
			expectWithin(point.fitted + point.conditional, rows[i]!.outcome!, 1e-9);
			expect(point.time).toBe(rows[i]!.time);
			expect(result.trajectories[point.subject]!.label).toBe(rows[i]!.subject);
		});
	});

	test('profile limits by ML agree with lme4’s', () => {
		const limits = expectedValues(set).profile_ci_95_ML_M1;
		const byMl = setUp(set, 'M1', 'ML').result.varianceComponents;
		const [subject, within] = [byMl[0]!, byMl[1]!];
		const sd = limits['sd_(Intercept)|subject']!;
		expectRelative(Math.sqrt(subject.lower), sd.lower, 1e-3);
		expectRelative(Math.sqrt(subject.upper), sd.upper, 1e-3);
		expectRelative(Math.sqrt(within.lower), limits.sigma!.lower, 1e-3);
		expectRelative(Math.sqrt(within.upper), limits.sigma!.upper, 1e-3);
	});
});

describe('contrasts and lines', () => {
	test('orthodont: difference at time 6, and the gap between the lines, are the reference contrast', () => {
		const { result, expected } = setUp('orthodont', 'M1', 'REML', 'kenward-roger');
		const e = expected.contrasts.arm_difference_at_time_6!;
		const ours = result.contrasts.find((c) => c.kind === 'difference-at-time')!;
		expectTest(ours, e, e.kr!, 1e-5);
		const [boys, girls] = result.fittedLines;
		const at = (line: typeof boys) => line!.points.at(-1)!;
		expect(at(boys).time).toBe(6);
		expectWithin(at(girls).estimate - at(boys).estimate, e.estimate, 1e-5 * e.se);
	});

	test('sleepstudy: the mean at nine days and its limits are the reference contrast', () => {
		const { result, expected } = setUp('sleepstudy', 'M1', 'REML', 'kenward-roger');
		const e = expected.contrasts.mean_at_time_9!;
		const last = result.fittedLines[0]!.points.at(-1)!;
		expect(result.fittedLines[0]!.points.length).toBe(25);
		expect(last.time).toBe(9);
		expectWithin(last.estimate, e.estimate, 1e-5 * e.se);
		expectWithin(last.lower, e.kr!.ci_lower, 1e-5 * e.se);
		expectWithin(last.upper, e.kr!.ci_upper, 1e-5 * e.se);
	});

	test('btheb: covariates are held at their average over subjects, not over rows', () => {
		const { result } = setUp('btheb', 'M1', 'REML');
		const bySubject = new Map(
			referenceRows('btheb').map((r) => [r.subject, r.covariates!.baseline as number])
		);
		const average = [...bySubject.values()].reduce((a, b) => a + b) / bySubject.size;
		expectRelative(result.model.linesAt[0]!.value, average, 1e-12);
		const beta = (name: string) => result.coefficients.find((c) => c.name === name)!.estimate;
		const point = result.fittedLines[0]!.points[0]!;
		expectRelative(
			point.estimate,
			beta('intercept') + point.time * beta('time') + average * beta('baseline'),
			1e-10
		);
	});
});

describe('printed values of the two textbook analyses, computed separately in R for this project', () => {
	const estimates = (r: GrowthResult) => r.coefficients.map((c) => c.estimate.toFixed(4));

	test('sleepstudy, random intercept by REML: slope 10.467, SE 0.804, criterion 1786.47', () => {
		const { result } = setUp('sleepstudy', 'M1', 'REML');
		expect(result.coefficients[0]!.estimate.toFixed(3)).toBe('251.405');
		expect(result.coefficients[1]!.estimate.toFixed(3)).toBe('10.467');
		expect(result.coefficients[1]!.standardError.toFixed(3)).toBe('0.804');
		expect(result.minusTwoLogLikelihood.toFixed(2)).toBe('1786.47');
	});

	test('Orthodont, (age − 8) × sex, random intercept by REML, boys as reference', () => {
		const { result } = setUp('orthodont', 'M1', 'REML', 'kenward-roger');
		expect(estimates(result)).toEqual(['22.6156', '0.7844', '-1.4065', '-0.3048']);
		const [subject, residual] = result.varianceComponents;
		expect(subject!.estimate.toFixed(4)).toBe('3.2986');
		expect(residual!.estimate.toFixed(4)).toBe('1.9221');
		expect(result.minusTwoLogLikelihood.toFixed(3)).toBe('433.757');
		expect(result.coefficients[3]!.df).toBeCloseTo(79, 6);
		expect(result.coefficients[3]!.p.toFixed(5)).toBe('0.01410');
	});
});
