import { describe, expect, test } from 'vitest';
import { carryOut } from '../analysis/analyse.js';
import type { Columns } from '../design/columns.js';
import { StatsError } from '../errors.js';
import { randomStream } from '../numeric/random.js';
import { readPlan } from '../read-plan.js';
import { expectRelative } from '../reference/close.js';
import { nextValue } from './next-value.js';
import { predictNext, predictor, type Predictor } from './predictor.js';
import { subjectEffects } from './subject-effects.js';

/** Level sd 3, slope sd 0.5, error sd 1, about 50 + 2 t (+ 5 in group b) + bmi; one visit a unit of time. */
function draw(random: ReturnType<typeof randomStream>, group: string, visits: number) {
	const [level, slope, bmi] = [3 * random.normal(), 0.5 * random.normal(), 20 + random.normal()];
	return Array.from({ length: visits }, (_, t) => ({
		time: t,
		visit: `v${t}`,
		covariates: { bmi },
		group,
		outcome: 50 + (group === 'b' ? 5 : 0) + bmi + (2 + slope) * t + level + random.normal()
	}));
}

function study(subjects: number): Columns {
	const random = randomStream(11);
	const rows = Array.from({ length: subjects }, (_, s) =>
		draw(random, s % 2 ? 'b' : 'a', 5).map((row) => ({ ...row, id: s }))
	).flat();
	return {
		id: rows.map((r) => r.id),
		t: rows.map((r) => r.time),
		visit: rows.map((r) => r.visit),
		arm: rows.map((r) => r.group),
		bmi: rows.map((r) => r.covariates.bmi),
		y: rows.map((r) => r.outcome)
	};
}

const data = study(300);
const analysisOf = (change: object = {}) =>
	carryOut(
		data,
		readPlan({
			outcome: 'y',
			subject: 'id',
			time: 't',
			visit: 'visit',
			group: 'arm',
			mean: { covariates: [{ name: 'bmi', kind: 'numeric' }] },
			...change
		}),
		{ componentLimits: false }
	);
const level = analysisOf();
const slopes = analysisOf({ subjectEffects: 'level-and-slope' });
const part = (analysis: typeof level, name: string) =>
	analysis.result.varianceComponents.find((c) => c.name === name)!.estimate!;

const past = [
	{ time: 0, covariates: { bmi: 20 }, outcome: 74 },
	{ time: 1, covariates: { bmi: 20 }, outcome: 77 }
];
const next = { time: 2, covariates: { bmi: 20 } };

describe('the next value of a subject', () => {
	test('under a level is the line and a shrunken mean of the residuals', () => {
		const b = (name: string) => level.result.coefficients.find((c) => c.name === name)!.estimate;
		const line = (t: number) => b('intercept') + b('time') * t + b('bmi') * 20;
		const [tau, sigma] = [part(level, 'subject level'), part(level, 'residual')];
		const offset = ((2 * tau) / (sigma + 2 * tau)) * ((74 - line(0) + 77 - line(1)) / 2);
		const value = nextValue(level, { group: 'a', past }, next);
		expectRelative(value.estimate, line(2) + offset, 1e-9);
		const open = sigma + tau - (2 * tau * tau) / (sigma + 2 * tau);
		expect(value.standardDeviation ** 2).toBeGreaterThan(open);
		expectRelative(value.standardDeviation ** 2, open, 0.02);
		expectRelative(
			(value.upper - value.lower) / 2 / value.standardDeviation,
			1.959963984540054,
			1e-9
		);
	});

	test('with no past is the line of the group, as uncertain as anybody', () => {
		const value = nextValue(level, { group: 'b', past: [] }, next);
		const variance = part(level, 'subject level') + part(level, 'residual');
		expectRelative(value.standardDeviation ** 2, variance, 0.02);
		expect(value.standardDeviation ** 2).toBeGreaterThan(variance);
		expect(value.estimate).toBeCloseTo(50 + 5 + 20 + 4, -0.5);
	});

	test('is less uncertain the more is known', () => {
		const sd = (n: number) =>
			nextValue(slopes, { group: 'a', past: past.slice(0, n) }, next).standardDeviation;
		expect(sd(1)).toBeLessThan(sd(0));
		expect(sd(2)).toBeLessThan(sd(1));
	});

	test('does not depend on the order of the past', () => {
		const value = nextValue(slopes, { group: 'a', past }, next);
		const turned = nextValue(slopes, { group: 'a', past: [...past].reverse() }, next);
		expectRelative(turned.estimate, value.estimate, 1e-12);
		expectRelative(turned.standardDeviation, value.standardDeviation, 1e-12);
	});

	test('lies in its interval as often as it says, for subjects not fitted', () => {
		const random = randomStream(12);
		const sets = 4000;
		let inside = 0;
		for (let k = 0; k < sets; k++) {
			const rows = draw(random, 'b', 4);
			const value = nextValue(slopes, { group: 'b', past: rows.slice(0, 3) }, rows[3]!);
			if (rows[3]!.outcome >= value.lower && rows[3]!.outcome <= value.upper) inside++;
		}
		// The fit of 300 subjects is itself off by a little: three Monte Carlo errors and 1 %.
		expect(Math.abs(inside / sets - 0.95)).toBeLessThan(3 * Math.sqrt((0.95 * 0.05) / sets) + 0.01);
	});

	test('on a log scale is a median with limits above zero', () => {
		const logs = analysisOf({ scale: 'log' });
		const value = nextValue(logs, { group: 'a', past }, next);
		expect(value.lower).toBeGreaterThan(0);
		expectRelative(value.estimate / value.lower, value.upper / value.estimate, 1e-9);
	});

	test('needs the visit where the model goes by visit, and takes a new one where it does not', () => {
		const categorical = analysisOf({
			subjectEffects: 'none',
			mean: { time: 'categorical' },
			errors: { structure: 'unstructured' }
		});
		const seen = past.map((o) => ({ ...o, visit: `v${o.time}` }));
		const history = { group: 'a', past: seen };
		expect(nextValue(categorical, history, { ...next, visit: 'v2' }).estimate).toBeGreaterThan(70);
		expect(() => nextValue(categorical, history, next)).toThrow(/The visit at time 2 is needed/);
		expect(() => nextValue(categorical, history, { ...next, visit: 'v9' })).toThrow(/“v9” is not/);
		expect(nextValue(level, history, { ...next, visit: 'v9' })).toEqual(
			nextValue(level, { group: 'a', past }, next)
		);
	});

	test('at a visit already seen shares its effect with it', () => {
		const shared = analysisOf({ visitEffects: true });
		const model = predictor(shared);
		// A ratio of 4 put into it, so that there is something to share.
		model.dependence.working[model.dependence.layout.visit] = 2;
		const history = { group: 'a', past: [{ ...past[0]!, visit: 'v0' }] };
		const there = predictNext(model, history, { ...next, visit: 'v0' }).standardDeviation;
		const elsewhere = predictNext(model, history, { ...next, visit: 'v2' }).standardDeviation;
		expect(there).toBeLessThan(elsewhere);
	});

	test('of a subject who was fitted is the mean with the subject’s own level and slope', () => {
		const { built, fit } = slopes;
		const own = subjectEffects(fit)[7]!;
		const at = Array.from({ length: 5 }, (_, v) => built.design.subjectStart[7]! + v);
		const bmi = data.bmi![built.design.rowOf[at[0]!]!] as number;
		const covariates = { bmi };
		const value = nextValue(
			slopes,
			{
				group: built.design.groups[built.design.subjectGroup[7]!]!,
				past: at.map((i) => ({
					time: built.design.time[i]!,
					covariates,
					outcome: built.design.y[i]!
				}))
			},
			{ time: 6, covariates }
		);
		const b = (name: string) => slopes.result.coefficients.find((c) => c.name === name)!.estimate;
		const line =
			b('intercept') + b('group b') + 6 * (b('time') + b('time × group b')) + bmi * b('bmi');
		expect(built.design.groups[built.design.subjectGroup[7]!]).toBe('b');
		expectRelative(value.estimate, line + own.level!.estimate + 6 * own.slope!.estimate, 1e-8);
	});

	test.each<[string, object]>([
		['independent', { subjectEffects: 'none' }],
		['level, cubic in time', { mean: { time: { degree: 3 } } }],
		['a common start and a knot', { mean: { time: { knots: [2] }, commonBaseline: true } }],
		['level, slope and visits', { subjectEffects: 'level-and-slope', visitEffects: true }],
		['serial with noise', { subjectEffects: 'none', errors: { structure: 'serial-with-noise' } }],
		['level and serial', { errors: { structure: 'serial' } }],
		[
			'Toeplitz with a variance for each visit, categories',
			{
				subjectEffects: 'none',
				mean: { time: 'categorical' },
				errors: { structure: 'toeplitz', varianceBy: 'visit' }
			}
		],
		['variances by arm', { errors: { structure: 'independent', varianceBy: 'group' } }],
		['unstructured', { subjectEffects: 'none', errors: { structure: 'unstructured' } }],
		['logarithms, baseline', { scale: 'log', mean: { covariates: [{ kind: 'baseline' }] } }]
	])('needs no data: coefficients through JSON give the same bits; %s', (_, change) => {
		const analysis = analysisOf(change);
		const text = JSON.stringify(predictor(analysis));
		expect(text.length).toBeLessThan(8000);
		const model = JSON.parse(text) as Predictor;
		const covariates = { bmi: 20, baseline: 70 };
		const seen = past.map((o) => ({ ...o, covariates, visit: `v${o.time + 1}`, time: o.time + 1 }));
		for (const history of [[], seen.slice(0, 1), seen])
			for (const time of [3, 4]) {
				const ask = { time, visit: `v${time}`, covariates };
				const there = nextValue(analysis, { group: 'a', past: history }, ask);
				expect(predictNext(model, { group: 'a', past: history }, ask)).toEqual(there);
				expect(there.lower).toBeGreaterThan(40);
				expect(there.upper).toBeLessThan(120);
			}
	});

	test('coefficients of another engine are refused', () => {
		const model = { ...predictor(level), engine: 'another' };
		expect(() => predictNext(model, { group: 'a', past }, next)).toThrow(
			expect.objectContaining({ code: 'bad-option' })
		);
	});

	test.each<[string, () => unknown, RegExp]>([
		['unknown-level', () => nextValue(level, { group: 'c', past }, next), /“c” is not among/],
		['bad-option', () => nextValue(level, { group: null, past }, next), /The group of the subject/],
		['bad-option', () => nextValue(level, { group: 'a', past }, { time: 2 }), /“bmi” is needed/],
		['bad-option', () => nextValue(level, { group: 'a', past }, next, 1), /between 0 and 1/],
		['not-finite', () => nextValue(level, { group: 'a', past }, { ...next, time: NaN }), /NaN/],
		[
			'wrong-kind',
			() => nextValue(level, { group: 'a', past }, { time: 2, covariates: { bmi: 'x' } }),
			/“x”; it must be a number/
		],
		[
			'not-finite',
			() => nextValue(level, { group: 'a', past: [{ ...past[0]!, outcome: Infinity }] }, next),
			/outcome is Infinity/
		],
		[
			'repeated-occasion',
			() =>
				nextValue(
					analysisOf({ subjectEffects: 'none', errors: { structure: 'serial' } }),
					{ group: 'a', past: [past[0]!, past[0]!] },
					next
				),
			/one and the same/
		]
	])('refuses: %s, case %#', (code, ask, sentence) => {
		let thrown: unknown;
		try {
			ask();
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).message).toMatch(sentence);
		expect((thrown as StatsError).code).toBe(code);
	});
});
