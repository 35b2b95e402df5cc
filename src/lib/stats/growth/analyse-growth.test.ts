import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { ENGINE_VERSION, StatsError, analyseGrowth, type GrowthRow } from '../index.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { referenceRows, referenceSpecs } from '../reference/load.js';

const rows = referenceRows('btheb');
const spec = referenceSpecs.btheb;
const result = analyseGrowth(rows, spec);
const by = <T extends { name: string }>(all: readonly T[], name: string) =>
	all.find((one) => one.name === name)!;

describe('the whole analysis', () => {
	test('is plain data: JSON gives it back unchanged, so it holds no NaN, Infinity or undefined', () => {
		expect(JSON.parse(JSON.stringify(result))).toEqual(result);
		expect(JSON.stringify(result)).not.toContain('null,null');
		expect(result.engineVersion).toBe(ENGINE_VERSION);
	});

	test('says what was fitted, with the defaults filled in', () => {
		expect(result.model).toMatchObject({
			method: 'REML',
			randomIntercept: true,
			degreesOfFreedom: 'kenward-roger',
			confidence: 0.95,
			groupLevels: ['0', '1'],
			timeRange: { from: 2, to: 8 }
		});
		expect(result.model.linesAt.map((l) => l.name)).toEqual(['baseline']);
		expect(result.groups.map((g) => g.subjects).reduce((a, b) => a + b)).toBe(97);
		expect(result.groups.map((g) => g.observations).reduce((a, b) => a + b)).toBe(280);
	});

	test('names its contrasts, and the difference in slopes is the interaction', () => {
		expect(result.contrasts.map((c) => c.name)).toEqual([
			'slope[0]',
			'slope[1]',
			'slope-difference[1-0]',
			'difference[1-0]@8'
		]);
		const interaction = by(result.coefficients, 'time:group[1]');
		expect(by(result.contrasts, 'slope-difference[1-0]')).toMatchObject({
			estimate: interaction.estimate,
			p: interaction.p,
			group: '1',
			reference: '0'
		});
		const slopes = ['slope[1]', 'slope[0]'].map((name) => by(result.contrasts, name).estimate);
		expectRelative(slopes[0]! - slopes[1]!, interaction.estimate, 1e-9);
		const [usual, computer] = result.fittedLines.map((line) => line.points.at(-1)!.estimate);
		expectRelative(by(result.contrasts, 'difference[1-0]@8').estimate, computer! - usual!, 1e-9);
	});

	test('three groups: each is compared with the first', () => {
		const three = rows.map((r) => ({
			...r,
			group: ['x', 'y', 'z'][Number(r.subject.slice(1)) % 3]!
		}));
		const { contrasts } = analyseGrowth(three, { group: {} }, { differenceTimes: [2, 5] });
		expect(contrasts.map((c) => c.name)).toEqual([
			'slope[x]',
			'slope[y]',
			'slope[z]',
			'slope-difference[y-x]',
			'slope-difference[z-x]',
			'difference[y-x]@2',
			'difference[y-x]@5',
			'difference[z-x]@2',
			'difference[z-x]@5'
		]);
		const parallel = analyseGrowth(three, { group: {}, groupByTime: false });
		expect(parallel.contrasts.map((c) => c.name)).toEqual([
			'slope',
			'difference[y-x]@8',
			'difference[z-x]@8'
		]);
	});

	test('one group: a slope and no comparison', () => {
		const one = analyseGrowth(referenceRows('sleepstudy'), {});
		expect(one.contrasts.map((c) => c.name)).toEqual(['slope']);
		expect(one.groups).toEqual([]);
		expect(one.fittedLines.map((l) => l.group)).toEqual([null]);
		expect(one.trajectories[0]!.group).toBeNull();
	});

	test('progress rises to one, and a stop is obeyed at every point it is asked', () => {
		const told: number[] = [];
		analyseGrowth(rows, spec, { onProgress: (fraction) => told.push(fraction) });
		expect(told).toEqual([...told].sort((a, b) => a - b));
		expect([told[0], told.at(-1)]).toEqual([0, 1]);
		let times = 0;
		analyseGrowth(rows, spec, { shouldStop: () => (times++, false) });
		for (let at = 1; at <= times; at++) {
			let asked = 0;
			expect(() => analyseGrowth(rows, spec, { shouldStop: () => ++asked === at })).toThrow(
				expect.objectContaining({ code: 'stopped' })
			);
		}
	});
});

describe('notes', () => {
	const codes = (r: typeof result) => r.notes.map((n) => n.code);

	test('tell what was dropped, in whole sentences', () => {
		const holed: GrowthRow[] = [
			...rows,
			{ subject: 'S001', time: 5, outcome: null, group: '0', covariates: { baseline: 29 } },
			{ subject: 'S900', time: 5, outcome: 12, group: '0', covariates: { baseline: null } }
		];
		const r = analyseGrowth(holed, spec);
		expect(r.notes.find((n) => n.code === 'rows-dropped')!.sentence).toBe(
			'Of 282 rows, 280 were used. Left out: 1 without an outcome, 1 with an outcome but without “baseline”. The model takes what is missing as missing at random.'
		);
		expect(r.notes.find((n) => n.code === 'subjects-dropped')!.sentence).toBe(
			'1 subject has no usable row and is not in the analysis.'
		);
		// The dropped rows change no digit.
		expect(r.coefficients).toEqual(result.coefficients);
		expect(codes(result)).not.toContain('rows-dropped');
	});

	test('tell of a zero variance, of averaged covariates, of extrapolation and of what the effective size is for', () => {
		const flat = Array.from({ length: 8 }, (_, s) =>
			[0, 1, 2, 3].map((v): GrowthRow => ({
				subject: `s${s}`,
				time: v,
				outcome: (v % 2 ? -1 : 1) * (2 + s / 3)
			}))
		).flat();
		const edge = analyseGrowth(flat, {}, { lineTimes: [0, 4] });
		expect(edge.boundary).toBe(true);
		expect(codes(edge)).toEqual([
			'subject-variance-zero',
			'effective-size-is-for-the-mean',
			'extrapolated'
		]);
		expect(edge.effectiveSampleSize).toEqual({ forMean: 32, designEffect: 1 });
		expect(edge.trajectories[0]!.effect).toMatchObject({ offset: 0, conditionalStandardError: 0 });
		expect(JSON.parse(JSON.stringify(edge))).toEqual(edge);
		expect(codes(result)).toEqual([
			'lines-at-average-covariates',
			'effective-size-is-for-the-mean'
		]);
		const plain = analyseGrowth(flat, {}, { randomIntercept: false });
		expect(codes(plain)).toEqual([]);
		expect(plain.icc).toBeNull();
		expect(plain.varianceComponents.map((v) => v.name)).toEqual(['residual']);
	});
});

describe('options that make no sense are refused', () => {
	test.each([
		[{ confidence: 1 }, 'bad-option'],
		[{ confidence: NaN }, 'bad-option'],
		[{ differenceTimes: [Infinity] }, 'bad-option'],
		[{ lineTimes: [NaN] }, 'bad-option'],
		[{ method: 'ML', degreesOfFreedom: 'kenward-roger' }, 'kenward-roger-needs-reml']
	] as const)('%j', (options, code) => {
		let thrown: unknown;
		try {
			analyseGrowth(rows, spec, options);
		} catch (error) {
			thrown = error;
		}
		expect(thrown).toBeInstanceOf(StatsError);
		expect((thrown as StatsError).code).toBe(code);
	});

	test('under ML Satterthwaite is the default', () => {
		expect(analyseGrowth(rows, spec, { method: 'ML' }).model.degreesOfFreedom).toBe(
			'satterthwaite'
		);
	});
});

describe('properties', () => {
	const shift = fc.double({ min: -1e6, max: 1e6, noNaN: true });
	const scale = fc.double({ min: 1e-6, max: 1e6, noNaN: true });

	test('shifting and scaling the outcome shifts the intercept, scales the rest, and moves no test', () => {
		fc.assert(
			fc.property(shift, scale, (a, b) => {
				const moved = analyseGrowth(
					rows.map((r) => ({ ...r, outcome: a + b * r.outcome! })),
					spec
				);
				// Digits lost by writing a small outcome beside a large shift are not the engine's.
				const tolerance = 1e-9 * (1 + Math.abs(a) / b / 1e4);
				for (const [i, before] of result.coefficients.entries()) {
					const after = moved.coefficients[i]!;
					const expected = b * before.estimate + (i === 0 ? a : 0);
					expectWithin(
						after.estimate,
						expected,
						tolerance * b * before.standardError * 1e2 + 1e-14 * Math.abs(a)
					);
					expectRelative(after.standardError, b * before.standardError, tolerance * 1e2);
					expectRelative(after.df, before.df, tolerance * 1e2);
				}
				expectRelative(moved.icc!.estimate, result.icc!.estimate, tolerance * 1e2);
				for (const [i, before] of result.varianceComponents.entries())
					expectRelative(
						moved.varianceComponents[i]!.upper,
						b * b * before.upper,
						1e-6 + tolerance * 1e2
					);
			}),
			{ numRuns: 25, seed: 7 }
		);
	});

	test('time in other units and from another origin gives the same lines, slopes in those units, same tests', () => {
		fc.assert(
			fc.property(fc.double({ min: -1e5, max: 1e5, noNaN: true }), scale, (a, b) => {
				const moved = analyseGrowth(
					rows.map((r) => ({ ...r, time: (r.time + a) * b })),
					spec
				);
				for (const name of ['slope[0]', 'slope[1]', 'slope-difference[1-0]']) {
					const before = by(result.contrasts, name);
					const after = by(moved.contrasts, name);
					expectRelative(after.estimate * b, before.estimate, 1e-7, name);
					expectRelative(after.df, before.df, 1e-7, name);
					expectRelative(after.p, before.p, 1e-5, name);
				}
				const last = (r: typeof result) => r.contrasts.at(-1)!;
				expectRelative(last(moved).estimate, last(result).estimate, 1e-6);
				expectRelative(last(moved).df, last(result).df, 1e-6);
				moved.fittedLines.forEach((line, g) =>
					line.points.forEach((point, i) => {
						const before = result.fittedLines[g]!.points[i]!;
						expectRelative(point.estimate, before.estimate, 1e-6);
						expectRelative(point.upper, before.upper, 1e-6);
					})
				);
			}),
			{ numRuns: 25, seed: 8 }
		);
	});

	test('shifting a covariate changes the intercept only', () => {
		const moved = analyseGrowth(
			rows.map((r) => ({
				...r,
				covariates: { baseline: (r.covariates!.baseline as number) + 1e6 }
			})),
			spec
		);
		for (const before of result.coefficients.slice(1)) {
			const after = by(moved.coefficients, before.name);
			expectWithin(after.estimate, before.estimate, 1e-7 * before.standardError);
			expectRelative(after.standardError, before.standardError, 1e-7);
			expectRelative(after.df, before.df, 1e-7);
		}
		expectRelative(
			moved.coefficients[0]!.estimate,
			result.coefficients[0]!.estimate - 1e6 * by(result.coefficients, 'baseline').estimate,
			1e-9
		);
	});

	test('the order of rows and the labels of subjects change nothing', () => {
		fc.assert(
			fc.property(fc.shuffledSubarray(rows, { minLength: rows.length }), (shuffled) => {
				const renamed = shuffled.map((r) => ({ ...r, subject: `${r.subject.slice(1)}*` }));
				const again = analyseGrowth(renamed, spec);
				for (const [i, before] of result.coefficients.entries()) {
					expectWithin(
						again.coefficients[i]!.estimate,
						before.estimate,
						1e-10 * before.standardError
					);
					expectRelative(again.coefficients[i]!.df, before.df, 1e-9);
				}
				expectWithin(again.logLikelihood, result.logLikelihood, 1e-9);
				const offset = (r: typeof result, label: string) =>
					r.trajectories.find((t) => t.label === label)!.effect!.offset;
				expectWithin(offset(again, '002*'), offset(result, 'S002'), 1e-9);
			}),
			{ numRuns: 10, seed: 9 }
		);
	});

	test('the same input gives the same bits', () => {
		expect(JSON.stringify(analyseGrowth(rows, spec))).toBe(JSON.stringify(result));
	});
});
