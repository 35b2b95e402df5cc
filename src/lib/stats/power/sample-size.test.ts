import { CholeskyDecomposition, Matrix, inverse } from 'ml-matrix';
import { describe, expect, test } from 'vitest';
import { expectRelative, expectWithin } from '../reference/close.js';
import { expectedSampleSizes } from '../reference/load-designs.js';
import { varianceOfDifference } from './information.js';
import { powerOf, sampleSize, type TestPlan } from './sample-size.js';
import type { Question, VisitDesign } from './types.js';

const expected = expectedSampleSizes();
const none = (times: readonly number[]) => times.map(() => 0);

function visits(times: number[], more: Partial<VisitDesign> = {}): VisitDesign {
	return {
		times,
		variances: { residual: 1, level: 1, slope: 0, levelSlopeCovariance: 0 },
		dropout: [none(times), none(times)],
		mean: 'linear',
		commonBaseline: false,
		...more
	};
}

describe.each(expected.slopes)('$id', (e) => {
	const question: Question = {
		question: 'slope-difference',
		...visits(e.times, {
			variances: {
				residual: e.sigma2,
				level: e.tau2_intercept,
				slope: e.tau2_slope,
				levelSlopeCovariance: e.cov_intercept_slope
			}
		})
	};
	const plan: TestPlan = {
		difference: e.slope_difference,
		alpha: e.alpha_two_sided,
		sides: 2,
		allocation: e.fraction_arm1
	};

	test('subjects, rounded up in each arm, and the variance of one subject’s slope', () => {
		const found = sampleSize(question, plan, e.power);
		expectRelative(found.totalUnrounded, e.n_total_unrounded, 1e-9);
		expect(found.subjects).toEqual([e.n_arm0, e.n_arm1]);
		if (e.per_group_unrounded !== null)
			expectRelative(found.armsUnrounded[1], e.per_group_unrounded, 1e-9);
		const f = e.fraction_arm1;
		const unit = varianceOfDifference(question, [1 - f, f]);
		expectRelative(unit / (1 / f + 1 / (1 - f)), e.variance_of_one_subject_slope, 1e-12);
		expect(found.power).toBeGreaterThanOrEqual(e.power);
		const arms = found.armsUnrounded;
		expectWithin(powerOf(question, plan, arms).power, e.power, 1e-12);
	});
});

test('a difference of means', () => {
	const e = expected.mean_difference;
	const question: Question = {
		question: 'mean-difference',
		visits: e.n_visits,
		icc: e.icc,
		totalVariance: e.sigma2_total,
		analysis: 'follow-up',
		baselineVisits: 0
	};
	const plan: TestPlan = { difference: e.delta, alpha: 0.05, sides: 2, allocation: 0.5 };
	const found = sampleSize(question, plan, e.power);
	expectRelative(found.armsUnrounded[0], e.n_per_group_unrounded, 1e-9);
	expect(found.subjects).toEqual([66, 66]);
	const worth = powerOf(question, plan, [50, 50]).effectiveSampleSize!;
	expectRelative(worth, e.effective_sample_size_for_100_subjects, 1e-12);
	expectRelative((100 * e.n_visits) / worth, e.variance_inflation, 1e-12);
});

test.each([
	['change', 1],
	['change', 3],
	['ancova', 1],
	['ancova', 3]
] as const)(
	'%s with %i visits before: variance from the covariance matrix written out',
	(analysis, p) => {
		const [n, icc, totalVariance] = [4, 0.55, 7];
		// Covariance of (mean before, mean after) from the (p + n)² matrix; regression takes its best share off.
		const size = p + n;
		const full = Array.from({ length: size }, (_, i) =>
			Array.from({ length: size }, (_, j) => totalVariance * (i === j ? 1 : icc))
		);
		const mean = (rows: [number, number], columns: [number, number]) => {
			let sum = 0;
			for (let i = rows[0]; i < rows[1]; i++)
				for (let j = columns[0]; j < columns[1]; j++) sum += full[i]![j]!;
			return sum / ((rows[1] - rows[0]) * (columns[1] - columns[0]));
		};
		const before = mean([0, p], [0, p]);
		const after = mean([p, size], [p, size]);
		const both = mean([0, p], [p, size]);
		const one = analysis === 'change' ? after + before - 2 * both : after - both ** 2 / before;
		const found = varianceOfDifference(
			{ question: 'mean-difference', visits: n, icc, totalVariance, analysis, baselineVisits: p },
			[20, 30]
		);
		expectRelative(found, one * (1 / 20 + 1 / 30), 1e-12);
	}
);

/** The second source: X'V⁻¹X of every subject written out and added up, whole numbers of subjects leaving. */
function writtenOut(
	question: Exclude<Question, { question: 'mean-difference' }>,
	subjects: [number, number]
) {
	const { times, variances: v, dropout, mean, commonBaseline } = question;
	const covariance = (a: number, b: number) =>
		v.level + v.levelSlopeCovariance * (a + b) + v.slope * a * b + (a === b ? v.residual : 0);
	const columns = (arm: number, t: number) => {
		const own = mean === 'linear' ? [1, t] : times.map((u) => (u === t ? 1 : 0));
		const arms = commonBaseline ? own.slice(1) : own;
		return [...own, ...arms.map((x) => x * arm)];
	};
	let information: Matrix | null = null;
	for (const arm of [0, 1] as const)
		for (let i = 0; i < subjects[arm]; i++) {
			const seen = times.filter((_, j) => (i + 0.5) / subjects[arm] >= dropout[arm][j]!);
			if (seen.length === 0) continue;
			const x = new Matrix(seen.map((t) => columns(arm, t)));
			const big = new Matrix(seen.map((a) => seen.map((b) => covariance(a, b))));
			const own = x.transpose().mmul(new CholeskyDecomposition(big).solve(x));
			information = information ? Matrix.add(information, own) : own;
		}
	const weights =
		question.question === 'slope-difference'
			? columns(1, 1).map((_, j, all) => (j === all.length - 1 ? 1 : 0))
			: columns(1, question.time).map((x, j) =>
					j < (mean === 'linear' ? 2 : times.length) ? 0 : x
				);
	const w = Matrix.columnVector(weights);
	return w.transpose().mmul(inverse(information!)).mmul(w).get(0, 0);
}

const times = [0, 1, 2.5, 6, 12];
const slopes = { residual: 4, level: 9, slope: 0.3, levelSlopeCovariance: -0.7 };
const leaving: VisitDesign['dropout'] = [
	[0, 0.1, 0.2, 0.2, 0.4],
	[0, 0, 0.25, 0.3, 0.35]
];
describe('variance against X’V⁻¹X added up over subjects', () => {
	test.each<[string, Partial<VisitDesign>]>([
		['level', { variances: { ...slopes, slope: 0, levelSlopeCovariance: 0 } }],
		['level and slope', { variances: slopes }],
		[
			'no subject effect',
			{ variances: { residual: 4, level: 0, slope: 0, levelSlopeCovariance: 0 } }
		],
		['dropout by arm', { variances: slopes, dropout: leaving }],
		['common baseline, dropout', { variances: slopes, dropout: leaving, commonBaseline: true }]
	])('%s', (_, more) => {
		for (const mean of ['linear', 'categorical'] as const)
			for (const question of ['slope-difference', 'difference-at-visit'] as const) {
				if (mean === 'categorical' && question === 'slope-difference') continue;
				const asked = { question, time: 6, ...visits(times, { ...more, mean }) };
				const found = varianceOfDifference(asked as Question, [20, 40]);
				expectRelative(found, writtenOut(asked as never, [20, 40]), 1e-10, `${mean} ${question}`);
			}
	});
});

test('dropout costs subjects, a common baseline saves some, looks cost their inflation', () => {
	const question = (more: Partial<VisitDesign>): Question => ({
		question: 'difference-at-visit',
		time: 12,
		...visits(times, { variances: slopes, mean: 'categorical', ...more })
	});
	const plan: TestPlan = { difference: 1.5, alpha: 0.05, sides: 2, allocation: 0.5 };
	const total = (more: Partial<VisitDesign>, test = plan) =>
		sampleSize(question(more), test, 0.9).totalUnrounded;
	expect(total({ dropout: leaving })).toBeGreaterThan(total({}));
	expect(total({ commonBaseline: true })).toBeLessThan(total({}));
	const looks = {
		informationFractions: [0.2, 0.4, 0.6, 0.8, 1],
		efficacy: { kind: 'pocock' as const }
	};
	// Jennison & Turnbull (2000), table 2.2, from memory: 1.207.
	expectWithin(total({}, { ...plan, looks }) / total({}), 1.207, 5e-4);
	const found = sampleSize(question({}), { ...plan, looks }, 0.9);
	expectWithin(powerOf(question({}), { ...plan, looks }, found.armsUnrounded).power, 0.9, 1e-9);
});

test('the unit of time and outcome plays no part', () => {
	const question = (scale: number, unit: number): Question => ({
		question: 'slope-difference',
		...visits(
			times.map((t) => t * scale),
			{
				dropout: leaving,
				variances: {
					residual: slopes.residual * unit ** 2,
					level: slopes.level * unit ** 2,
					slope: slopes.slope * (unit / scale) ** 2,
					levelSlopeCovariance: (slopes.levelSlopeCovariance * unit ** 2) / scale
				}
			}
		)
	});
	const total = (scale: number, unit: number) =>
		sampleSize(
			question(scale, unit),
			{ difference: (0.3 * unit) / scale, alpha: 0.05, sides: 2, allocation: 0.4 },
			0.8
		).totalUnrounded;
	expectRelative(total(86_400_000, 1e6), total(1, 1), 1e-9);
});

const plan: TestPlan = { difference: 1, alpha: 0.05, sides: 2, allocation: 0.5 };
const slope: Question = { question: 'slope-difference', ...visits([0, 1, 2]) };
test.each<[Partial<Record<string, unknown>>, Partial<TestPlan>, number, RegExp]>([
	[{ times: [0] }, {}, 0.9, /2 to 200 visits/],
	[{ times: [0, 0, 1] }, {}, 0.9, /must increase/],
	[{ mean: 'categorical' }, {}, 0.9, /straight line/],
	[{ dropout: [[0, 0], none([0, 1, 2])] }, {}, 0.9, /each of the 3 visits/],
	[{ dropout: [[0, 0.5, 0.2], none([0, 1, 2])] }, {}, 0.9, /never fall/],
	[
		{ variances: { residual: 0, level: 1, slope: 0, levelSlopeCovariance: 0 } },
		{},
		0.9,
		/residual/
	],
	[
		{ variances: { residual: 1, level: 1, slope: 1, levelSlopeCovariance: 2 } },
		{},
		0.9,
		/covariance/
	],
	[{}, { difference: 0 }, 0.9, /not 0/],
	[{}, { alpha: 1 }, 0.9, /Alpha/],
	[{}, { allocation: 1 }, 0.9, /share of arm 1/],
	[{}, {}, 0.01, /Power/],
	[{}, { difference: 1e-9 }, 0.9, /subjects/],
	[
		{ question: 'difference-at-visit', time: 0, commonBaseline: true },
		{},
		0.9,
		/cannot differ there/
	],
	[{ question: 'difference-at-visit', time: 5, mean: 'categorical' }, {}, 0.9, /must be one of/],
	[{ question: 'mean-difference', visits: 0 }, {}, 0.9, /1 to 1000/],
	[{ question: 'mean-difference', visits: 3, totalVariance: 1, icc: 1 }, {}, 0.9, /ICC/],
	[
		{ question: 'mean-difference', visits: 3, totalVariance: 1, icc: 0, analysis: 'change' },
		{},
		0.9,
		/before/
	]
])('what cannot be planned, %j %j %d, is refused', (change, test, power, sentence) => {
	const question = { analysis: 'follow-up', baselineVisits: 0, ...slope, ...change } as Question;
	expect(() => sampleSize(question, { ...plan, ...test }, power)).toThrow(sentence);
});
