import type { CutFlow } from '$lib/domain/flow/cut-flow';
import type { LookReportInput } from '$lib/report';
import type { GrowthResult, TestedEstimate } from '$lib/stats/types';

const tested = (
	estimate: number,
	standardError: number,
	df: number,
	t: number,
	p: number,
	half: number
): TestedEstimate => ({
	estimate,
	standardError,
	df,
	t,
	p,
	lower: estimate - half,
	upper: estimate + half
});

/**
 * A result in the shape of a fit, hand-made: it tests printing, not estimation. Levels of the group
 * are given, so that the same numbers serve for arms and for a characteristic.
 */
export function growthResult(levels: [string, string] | [] = ['boy', 'girl']): GrowthResult {
	const [first, second] = levels;
	const grouped = first !== undefined && second !== undefined;
	const groupOf = (i: number) => (grouped ? (i % 2 === 0 ? first : second) : null);
	const times = [8, 10, 12, 14];
	const trajectories = Array.from({ length: 27 }, (_, i) => {
		const offset = ((i * 37) % 27) / 5 - 2.6;
		return {
			subject: i,
			label: `S${i}`,
			group: groupOf(i),
			points: times.map((time, k) => {
				const fitted = 16 + 0.7 * time + offset;
				return { time, outcome: fitted + (((i * 7 + k * 13) % 11) - 5) / 4, fitted };
			}),
			effect: { offset, conditionalStandardError: 0.6, predictionStandardError: 0.7 }
		};
	});
	const line = (level: number, slope: number) =>
		times.map((time) => {
			const estimate = level + slope * time;
			return { time, estimate, lower: estimate - 0.9, upper: estimate + 0.9 };
		});
	return {
		engineVersion: '1.0.0',
		model: {
			method: 'REML',
			randomIntercept: true,
			degreesOfFreedom: 'kenward-roger',
			confidence: 0.95,
			terms: grouped
				? ['intercept', 'time', `group[${second}]`, `time:group[${second}]`]
				: ['intercept', 'time'],
			groupLevels: grouped ? [first, second] : [],
			groupByTime: grouped,
			covariates: [],
			linesAt: [],
			timeRange: { from: 8, to: 14 }
		},
		counts: {
			rows: 108,
			observations: 107,
			subjects: 27,
			droppedSubjects: 0,
			droppedOutcomes: 1,
			droppedRows: 0,
			missingByVariable: [],
			fewestPerSubject: 3,
			mostPerSubject: 4
		},
		groups: grouped
			? [
					{ name: first, subjects: 16, observations: 63 },
					{ name: second, subjects: 11, observations: 44 }
				]
			: [],
		coefficients: [
			{ name: 'intercept', ...tested(16.340625, 0.981312, 103.986, 16.6518, 5.33e-31, 1.946) },
			{ name: 'time', ...tested(0.784375, 0.0775011, 79, 10.1208, 6.44e-16, 0.154262) },
			...(grouped
				? [
						{
							name: `group[${second}]`,
							...tested(1.0321023, 1.5374208, 103.986, 0.67132, 0.50349, 3.0488)
						},
						{
							name: `time:group[${second}]`,
							...tested(-0.3048295, 0.1214209, 79, -2.51052, 0.0141, 0.24168)
						}
					]
				: [])
		],
		covariance: [],
		contrasts: grouped
			? [
					{
						name: `slope[${first}]`,
						kind: 'slope',
						group: first,
						reference: null,
						time: null,
						weights: [0, 1, 0, 0],
						...tested(0.784375, 0.0775011, 79, 10.1208, 6.44e-16, 0.154262)
					},
					{
						name: `slope[${second}]`,
						kind: 'slope',
						group: second,
						reference: null,
						time: null,
						weights: [0, 1, 0, 1],
						...tested(0.4795455, 0.0934704, 79, 5.13045, 2.02e-6, 0.186048)
					},
					{
						name: `slope-difference[${second}-${first}]`,
						kind: 'slope-difference',
						group: second,
						reference: first,
						time: null,
						weights: [0, 0, 0, 1],
						...tested(-0.3048295, 0.1214209, 79, -2.51052, 0.0141, 0.24168)
					},
					{
						name: `difference[${second}-${first}]@14`,
						kind: 'difference-at-time',
						group: second,
						reference: first,
						time: 14,
						weights: [0, 0, 1, 14],
						...tested(-3.2355114, 0.9185, 45.2, -3.5226, 0.00098, 1.8497)
					}
				]
			: [
					{
						name: 'slope',
						kind: 'slope',
						group: null,
						reference: null,
						time: null,
						weights: [0, 1],
						...tested(0.6601852, 0.0616059, 80, 10.7163, 2.5e-17, 0.1226)
					}
				],
		varianceComponents: [
			{
				name: 'subject',
				estimate: 3.29863,
				standardDeviation: 1.81621,
				lower: 1.7361,
				upper: 6.2183
			},
			{
				name: 'residual',
				estimate: 1.92207,
				standardDeviation: 1.38639,
				lower: 1.4217,
				upper: 2.6712
			}
		],
		icc: { estimate: 0.63184, lower: 0.4521, upper: 0.7788 },
		effectiveSampleSize: { forMean: 37.34, designEffect: 2.8656 },
		logLikelihood: -216.87873,
		minusTwoLogLikelihood: 433.75746,
		criteria: {
			parameters: grouped ? 6 : 4,
			aic: 445.75746,
			bicRows: 461.8,
			bicRowsMinusCoefficients: 461.6,
			bicSubjects: 453.5
		},
		fittedLines: grouped
			? [
					{ group: first, points: line(16.34, 0.784) },
					{ group: second, points: line(17.37, 0.48) }
				]
			: [{ group: null, points: line(16.76, 0.66) }],
		trajectories,
		residuals: trajectories.flatMap((t) =>
			t.points.map((p) => ({
				subject: t.subject,
				time: p.time,
				fitted: p.fitted,
				marginalFitted: p.fitted - t.effect.offset,
				conditional: p.outcome - p.fitted,
				marginal: p.outcome - p.fitted + t.effect.offset
			}))
		),
		converged: true,
		gradient: 2.1e-9,
		iterations: 8,
		boundary: false,
		notes: [{ code: 'rows-dropped', sentence: '1 row without an outcome was left out.' }]
	};
}

export const fingerprint = '7c1e90ab44d2b6f1053e8a9c21d4f7700c9be35a6d18e2f4875a3b6c9d0e1f22';

export function lookInput(change: Partial<LookReportInput> = {}): LookReportInput {
	return {
		study: { name: 'Larkfield', code: 'LGC-2' },
		kind: 'open',
		cut: {
			id: '0199c0de-0000-7000-8000-000000000001',
			label: 'Cut 1',
			cutOffAt: '2026-06-01T06:00:00Z',
			extractedAt: '2026-06-01T06:04:09Z',
			fingerprint,
			subjects: 27,
			measurements: 1080
		},
		look: {
			number: 1,
			planned: true,
			question: 'Does the yearly change in height differ between girls and boys?'
		},
		measure: { name: 'Height', unit: 'mm' },
		time: { name: 'age', unit: 'years', one: 'year' },
		group: { kind: 'characteristic', label: 'sex' },
		result: growthResult(),
		modelWords:
			'Compare the yearly change in height between boys and girls, letting each subject have its own level.',
		provenance: {
			engineVersion: '1.0.0',
			appVersion: '0.1.0',
			seed: null,
			softwareVersions: { node: '20.20.0', 'ml-matrix': '6.15.1', jstat: '1.9.6' },
			inputHash: 'b5d4045c3f466fa91fe2cc6abe79232a1a57cdf104f7a26e716e0a1e2789df78',
			madeAt: '2026-06-01T07:00:00Z',
			madeBy: 'Ada Fenwick'
		},
		...change
	};
}

/** Two masked arms behind letters; B is the reference, so that order is not given away by the alphabet. */
export const byArm = (change: Partial<LookReportInput> = {}): LookReportInput =>
	lookInput({
		kind: 'closed',
		study: { name: 'Aldermere', code: 'AMR-01' },
		look: { number: 1, planned: true, question: 'Does the yearly change differ between the arms?' },
		modelWords:
			'Compare the yearly change between the arms, letting each subject have its own level.',
		group: { kind: 'arm', letters: { Placebo: 'B', Venatrol: 'A' } },
		result: growthResult(['Placebo', 'Venatrol']),
		...change
	});

const column = (arm: string | null, n: number) => ({
	arm,
	n,
	discontinued: 1,
	ended: [
		{ label: 'died', n: 0 },
		{ label: 'consent withdrawn', n: 1 },
		{ label: 'lost to follow-up', n: 2 },
		{ label: 'stopped visits', n: 0 }
	],
	completed: 3,
	inFollowUp: n - 6,
	measured: n - 1
});

/** 40 assessed, 27 enrolled, 25 randomised, at two sites with a plan; by arm where arms are named. */
export const flowHeld = (arms: [string, string] | null = null): CutFlow => ({
	flow: {
		randomises: true,
		assessed: 40,
		inScreening: 2,
		excluded: [
			{ label: 'eGFR above 60 at screening', n: 8 },
			{ label: 'Declined', n: 3 }
		],
		takenOver: 0,
		enrolled: 27,
		notRandomised: [
			{ label: 'left before', n: 1 },
			{ label: 'not randomised yet', n: 1 }
		],
		columns: arms ? [column(arms[0], 13), column(arms[1], 12)] : [column(null, 25)]
	},
	plan: [
		{ site: 'Northmoor', goal: 30, counts: [4, 9, 16] },
		{ site: 'Saltreach', goal: 18, counts: [0, 5, 11] }
	].map(({ site, goal, counts }) => ({
		site,
		goal,
		months: ['2026-04', '2026-05', '2026-06', '2026-07'].map((month, at) => ({
			month,
			planned: (goal * Math.min(at + 1, 3)) / 3,
			enrolled: counts[at] ?? null,
			inMonth: (counts[at] ?? 0) - (counts[at - 1] ?? 0)
		}))
	}))
});
