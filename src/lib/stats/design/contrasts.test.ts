import { describe, expect, test } from 'vitest';
import { StatsError } from '../errors.js';
import type { AnalysisPlan, Mean } from '../plan.js';
import { buildModelDesign, type BuiltDesign } from './build-model-design.js';
import {
	changeFromBaseline,
	coefficientAt,
	combination,
	differenceAt,
	differenceInChange,
	isEstimable,
	meanAt,
	slope,
	slopeDifference,
	type Contrast
} from './contrasts.js';
import { planWith, study } from './example.js';

const build = (change: Partial<AnalysisPlan> = {}, mean: Partial<Mean> = {}, data = study) =>
	buildModelDesign(data, planWith(change, mean));

/** The weights by name, zeros left out. */
const byName = ({ design }: BuiltDesign, { weights }: Contrast) =>
	Object.fromEntries(design.names.flatMap((name, j) => (weights[j] ? [[name, weights[j]]] : [])));

const linear = build({}, { covariates: [{ name: 'bmi', kind: 'numeric' }] });
const knots = build({}, { time: { knots: [1] }, covariates: [] });
const visits = build({}, { time: 'categorical' });
const common = build({}, { time: 'categorical', commonBaseline: true });
const curved = build({}, { time: { degree: 2 } });
const curvedCommon = build({}, { time: { degree: 2 }, commonBaseline: true });

describe('contrasts by what they mean', () => {
	const cases: [string, BuiltDesign, Contrast, Record<string, number>][] = [
		['slope of the reference', linear, slope(linear, '0'), { time: 1 }],
		['slope of a group', linear, slope(linear, '1'), { time: 1, 'time × group 1': 1 }],
		['difference in slopes', linear, slopeDifference(linear, '1', '0'), { 'time × group 1': 1 }],
		['the other way round', linear, slopeDifference(linear, '0', '1'), { 'time × group 1': -1 }],
		[
			'difference at a time',
			linear,
			differenceAt(linear, '1', '0', { time: 3 }),
			{ 'group 1': 1, 'time × group 1': 3 }
		],
		[
			'change from baseline',
			linear,
			changeFromBaseline(linear, '1', { time: 3 }),
			{ time: 3, 'time × group 1': 3 }
		],
		[
			'difference in change',
			linear,
			differenceInChange(linear, '1', '0', { time: 3 }),
			{ 'time × group 1': 3 }
		],
		[
			'slope after a knot',
			knots,
			slope(knots, '1', 2),
			{ time: 1, 'time after 1': 1, 'time × group 1': 1, 'time after 1 × group 1': 1 }
		],
		['slope before a knot', knots, slope(knots, '0', 0.5), { time: 1 }],
		[
			'difference at a visit',
			visits,
			differenceAt(visits, '1', '0', { visit: 'end' }),
			{ 'group 1': 1, 'visit end × group 1': 1 }
		],
		[
			'change to a visit',
			visits,
			changeFromBaseline(visits, '0', { visit: 'mid' }),
			{ 'visit mid': 1 }
		],
		[
			'difference at a visit from a common baseline',
			common,
			differenceAt(common, '1', '0', { visit: 'end' }),
			{ 'visit end × group 1': 1 }
		],
		['slope of a curve', curved, slope(curved, '0', 3), { time: 1, 'time squared': 6 }],
		[
			'difference on curves from a common baseline',
			curvedCommon,
			differenceAt(curvedCommon, '1', '0', { time: 4 }),
			{ 'time × group 1': 4, 'time squared × group 1': 16 }
		]
	];
	test.each(cases)('%s', (_, built, contrast, expected) => {
		expect(byName(built, contrast)).toEqual(expected);
	});

	test('the mean of a group takes covariates at their average over subjects', () => {
		// bmi of the rows in use: b 20 20, a 22 21 21, c 25 26, d 23 24, e 19 18.
		const bmi = (20 + 64 / 3 + 25.5 + 23.5 + 18.5) / 5;
		expect(byName(linear, meanAt(linear, '1', { time: 2 }))).toEqual({
			intercept: 1,
			time: 2,
			'group 1': 1,
			'time × group 1': 2,
			bmi: expect.closeTo(bmi, 12)
		});
	});

	test('without groups none is named', () => {
		const one = build({ group: null });
		expect(byName(one, slope(one))).toEqual({ time: 1 });
		expect(byName(one, meanAt(one, null, { time: 2 }))).toEqual({ intercept: 1, time: 2 });
	});

	test('a single coefficient is its own contrast', () => {
		expect(coefficientAt(linear, 2)).toEqual({
			weights: [0, 0, 1, 0, 0],
			inside: [0, 0, 1, 0, 0]
		});
	});
});

describe('inside weights', () => {
	test.each([
		['curve', curved],
		['curve from a common baseline', curvedCommon]
	])('of a %s say the same as the reported ones', (_, built) => {
		const { design, ownScale } = built;
		const p = design.p;
		const gamma = design.names.map((_, j) => Math.cos(j + 1));
		const own = design.names.map((_, i) =>
			gamma.reduce((sum, g, j) => sum + ownScale!.matrix[i * p + j]! * g, 0)
		);
		const dot = (a: number[], b: number[]) => a.reduce((sum, v, i) => sum + v * b[i]!, 0);
		for (const contrast of [
			slope(built, '1', 1.5),
			differenceAt(built, '1', '0', { time: 3 }),
			changeFromBaseline(built, '1', { time: 4 }),
			meanAt(built, '0', { time: 1 }),
			combination(built, { 'time squared': 2, time: -1 }),
			coefficientAt(built, 1)
		])
			expect(dot(contrast.inside, gamma)).toBeCloseTo(dot(contrast.weights, own), 10);
	});

	test('keep their digits when time is counted from a far origin', () => {
		const when = Array.from(study.when!, (t) => Number(t) / 4 + 2025);
		const far = build({ group: null }, { time: { degree: 2 } }, { ...study, when });
		expect(meanAt(far, null, { time: 2026 }).inside).toEqual([1, 1, 1]);
		expect(meanAt(far, null, { time: 2026 }).weights).toEqual([1, 2026, 2026 ** 2]);
	});
});

describe('what the data do not determine', () => {
	const y = Array.from(study.y!, (v, i) =>
		study.visit![i] === 'mid' && study.arm![i] === 1 ? null : v
	);
	const gap = build({}, { time: 'categorical' }, { ...study, y });
	const twice = build(
		{ visit: null, group: null },
		{
			covariates: [
				{ name: 'bmi', kind: 'numeric' },
				{ name: 'twice', kind: 'numeric' }
			]
		},
		{ ...study, twice: Array.from(study.bmi!, (b) => (b === null ? null : 2 * Number(b))) }
	);

	test('is refused by name, and the rest still works', () => {
		expect(() => differenceAt(gap, '1', '0', { visit: 'mid' })).toThrow(
			/The difference of “1” and “0” at visit mid cannot be estimated: it needs “visit mid × group 1”, for which/
		);
		expect(byName(gap, differenceAt(gap, '1', '0', { visit: 'end' }))).toEqual({
			'group 1': 1,
			'visit end × group 1': 1
		});
		expect(isEstimable(gap, { 'visit mid': 1 })).toBe(true);
		expect(isEstimable(gap, { 'visit mid × group 1': 1 })).toBe(false);
	});

	test('a left-out coefficient may take part in a whole that is determined', () => {
		expect(() => combination(twice, { twice: 1 })).toThrow(
			/it needs “twice”, which “bmi” determines/
		);
		expect(() => combination(twice, { bmi: 1 })).toThrow(StatsError);
		// One more of bmi is two more of twice, whatever their coefficients.
		expect(byName(twice, combination(twice, { bmi: 1, twice: 2 }))).toEqual({ bmi: 1 });
		expect(isEstimable(twice, { bmi: 1, twice: 2 })).toBe(true);
		expect(byName(twice, slope(twice))).toEqual({ time: 1 });
		expect(Object.keys(byName(twice, meanAt(twice, null, { time: 1 })))).toEqual([
			'intercept',
			'time',
			'bmi'
		]);
	});
});

describe('refusals', () => {
	const none = build({}, { time: 'none' });
	const cases: [string, () => unknown, RegExp][] = [
		['unknown-level', () => slope(linear, '2'), /“2” is not among the groups.*“0”, “1”/],
		['unknown-level', () => slope(build({ group: null }), '1'), /The model has no group/],
		[
			'unknown-level',
			() => meanAt(visits, '1', { visit: 'late' }),
			/“late” is not among the visits/
		],
		['bad-option', () => meanAt(linear, '1', { visit: 'end' }), /goes by time and not by visit/],
		['bad-option', () => meanAt(visits, '1', { time: 1 }), /goes by visit and not by time/],
		['bad-option', () => meanAt(linear, '1', { time: NaN }), /The time NaN is not finite/],
		['bad-option', () => slope(linear), /one of them must be named: “0”, “1”/],
		['bad-option', () => slope(visits, '1'), /there is no slope/],
		['bad-option', () => slope(none, '1'), /Time is not in the mean/],
		['bad-option', () => slope(knots, '1'), /The slope changes with time/],
		['bad-option', () => slope(knots, '1', Infinity), /not finite/],
		['bad-option', () => changeFromBaseline(linear, '1', { time: 0 }), /is zero whatever the data/],
		['unknown-coefficient', () => combination(linear, { slope: 1 }), /“slope”.*It has “intercept”/],
		['bad-plan', () => combination(linear, { time: NaN }), /the weight NaN/]
	];
	test.each(cases)('%s: case %#', (code, ask, sentence) => {
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
