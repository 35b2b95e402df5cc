import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import { precisionOf } from '../inference/precision.js';
import type { Dependence, ErrorStructure, SubjectEffects } from '../plan.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { referenceDesign } from '../reference/reference-design.js';
import { referenceModels } from '../reference/reference-fits.js';
import { fitModel, fitPrepared } from './fit-model.js';
import { prepareModel, withOutcome } from './prepare-model.js';
import { covarianceOf, fittedMean, outcomeDrawer } from './subject-view.js';

/** A small congruential generator (Numerical Recipes, 2nd ed., 7.1): all a test needs. */
function chance(seed: number) {
	let state = seed >>> 0;
	const unit = () => {
		state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
		return (state + 0.5) / 2 ** 32;
	};
	return () => Math.sqrt(-2 * Math.log(unit())) * Math.cos(2 * Math.PI * unit());
}

/** Subjects × visits with intercept, time and group; `outcome` may use the place and chance. */
function grid(
	subjects: number,
	visits: number,
	outcome: (s: number, v: number, normal: () => number) => number,
	columns = 3
): ModelDesign {
	const n = subjects * visits;
	const normal = chance(99);
	const x = new Float64Array(n * columns);
	for (let i = 0; i < n; i++)
		[1, i % visits, Math.floor(i / visits) % 2]
			.slice(0, columns)
			.forEach((f, j) => (x[j * n + i] = f));
	return {
		n,
		p: columns,
		x,
		y: Float64Array.from({ length: n }, (_, i) =>
			outcome(Math.floor(i / visits), i % visits, normal)
		),
		names: ['intercept', 'time', 'group'].slice(0, columns),
		time: Float64Array.from({ length: n }, (_, i) => i % visits),
		visit: Int32Array.from({ length: n }, (_, i) => i % visits),
		visits: Array.from({ length: visits }, (_, v) => String(v + 1)),
		subjectStart: Int32Array.from({ length: subjects + 1 }, (_, s) => s * visits),
		subjects: Array.from({ length: subjects }, (_, s) => `s${s}`),
		subjectGroup: Int32Array.from({ length: subjects }, (_, s) => s % 2),
		groups: ['a', 'b'],
		rowOf: Int32Array.from({ length: n }, (_, i) => i),
		timeInMean: 'linear',
		aliased: []
	};
}

const model = (
	subjectEffects: SubjectEffects,
	structure: ErrorStructure,
	rest: Partial<Dependence['errors']> & { visitEffects?: boolean } = {}
): Dependence => ({
	subjectEffects,
	visitEffects: rest.visitEffects ?? false,
	errors: { structure, along: rest.along ?? 'time', varianceBy: rest.varianceBy ?? 'none' }
});

const noisy = (s: number, v: number, normal: () => number) =>
	Math.sin(5 * s) * 2 + v * (0.5 + 0.1 * Math.cos(3 * s)) + normal();

const btheb = referenceDesign('btheb', ['(Intercept)', 'baseline', 'time', 'arm', 'time:arm']);

describe('the same data in other units', () => {
	const models: [string, Dependence][] = [
		...Object.entries(referenceModels).filter(
			([name]) => !['M4', 'M4n', 'M5', 'M6'].includes(name)
		),
		['level by group', model('level', 'independent', { varianceBy: 'group' })],
		['slope only', model('slope', 'serial', { along: 'visit' })],
		['visit effects', model('level-and-slope', 'independent', { visitEffects: true })]
	];
	test.each(models)(
		'%s: milliseconds from a far origin and outcomes in millions',
		(name, dependence) => {
			// Uncorrelated and slope-only effects have their origin at time 0, so there only the unit changes.
			const free = !['M2d', 'slope only'].includes(name);
			const unit = 2.6e9;
			const origin = free ? 1.7e12 : 0;
			const big = 1e6;
			const far = origin + 0;
			const { n } = btheb;
			const x = btheb.x.slice();
			for (let i = 0; i < n; i++) {
				x[2 * n + i] = btheb.time[i]! * unit + far;
				x[4 * n + i] = x[2 * n + i]! * x[3 * n + i]!;
			}
			const other: ModelDesign = {
				...btheb,
				x,
				time: btheb.time.map((t) => t * unit + far),
				y: btheb.y.map((v) => v * big + 4e9)
			};
			const plain = fitModel(btheb, dependence, { method: 'ml' });
			const scaled = fitModel(other, dependence, { method: 'ml' });
			expectWithin(scaled.logLikelihood, plain.logLikelihood - n * Math.log(big), 1e-6);
			expect(scaled.converged).toBe(true);
			expect(scaled.boundary).toEqual(plain.boundary);
			// Slopes and their standard errors go with the units; those at time 0 move with the origin.
			for (const j of [1, 2, 4]) {
				const to = big / (j === 1 ? 1 : unit);
				expectWithin(
					scaled.beta[j]!,
					plain.beta[j]! * to,
					1e-5 * plain.se[j]! * to,
					btheb.names[j]
				);
				expectRelative(scaled.se[j]!, plain.se[j]! * to, 1e-5, btheb.names[j]);
			}
			const weights = [0, 0, 0, 0, 1];
			expectRelative(
				precisionOf(scaled, 'satterthwaite').test(weights).df,
				precisionOf(plain, 'satterthwaite').test(weights).df,
				1e-3
			);
		}
	);
});

describe('order and labels', () => {
	test('subjects in another order give the same fit', () => {
		fc.assert(
			fc.property(fc.shuffledSubarray([...btheb.subjects.keys()], { minLength: 97 }), (order) => {
				const index = order.flatMap((s) =>
					Array.from(
						{ length: btheb.subjectStart[s + 1]! - btheb.subjectStart[s]! },
						(_, i) => btheb.subjectStart[s]! + i
					)
				);
				const { n, p } = btheb;
				const x = new Float64Array(n * p);
				for (let j = 0; j < p; j++)
					index.forEach((from, i) => (x[j * n + i] = btheb.x[j * n + from]!));
				const start = new Int32Array(order.length + 1);
				order.forEach((s, k) => {
					start[k + 1] = start[k]! + btheb.subjectStart[s + 1]! - btheb.subjectStart[s]!;
				});
				const shuffled: ModelDesign = {
					...btheb,
					x,
					y: Float64Array.from(index, (i) => btheb.y[i]!),
					time: Float64Array.from(index, (i) => btheb.time[i]!),
					visit: Int32Array.from(index, (i) => btheb.visit[i]!),
					subjectStart: start,
					subjectGroup: Int32Array.from(order, (s) => btheb.subjectGroup[s]!)
				};
				for (const name of ['M1', 'M3n', 'M8toeph_cat']) {
					const a = fitModel(btheb, referenceModels[name]!, { method: 'reml' });
					const b = fitModel(shuffled, referenceModels[name]!, { method: 'reml' });
					expectWithin(a.logLikelihood, b.logLikelihood, 1e-8);
					a.beta.forEach((v, j) => expectWithin(b.beta[j]!, v, 1e-5 * a.se[j]!));
				}
			}),
			{ numRuns: 5, seed: 7 }
		);
	});

	test.each([
		['serial along visits', model('none', 'serial', { along: 'visit' })],
		['with a variance per visit', model('level', 'serial', { along: 'visit', varianceBy: 'visit' })]
	])('%s: visits held in another order of time hang together by visit', (_, dependence) => {
		const plain = grid(14, 5, noisy);
		// The second and third visit of every third subject change places in time, and so in the rows.
		const other: ModelDesign = {
			...plain,
			visit: plain.visit.slice(),
			y: plain.y.slice(),
			x: plain.x.slice()
		};
		for (let s = 0; s < 14; s += 3) {
			const i = s * 5 + 1;
			for (const [to, from] of [
				[i, i + 1],
				[i + 1, i]
			] as const) {
				other.visit[to] = plain.visit[from]!;
				other.y[to] = plain.y[from]!;
				for (let j = 0; j < plain.p; j++) other.x[j * plain.n + to] = plain.x[j * plain.n + from]!;
			}
		}
		const a = fitModel(plain, dependence, { method: 'reml' });
		const b = fitModel(other, dependence, { method: 'reml' });
		expectWithin(b.logLikelihood, a.logLikelihood, 1e-8);
		const [s, t] = [a, b].map((f) => precisionOf(f, 'kenward-roger').test([0, 1, 0]));
		expectRelative(t!.df, s!.df, 1e-6);
		expectRelative(t!.standardError, s!.standardError, 1e-6);
	});

	test('the same input gives the same bits', () => {
		for (const dependence of Object.values(referenceModels)) {
			if (dependence.errors.structure === 'serial-with-noise') continue;
			const a = fitModel(btheb, dependence, { method: 'reml' });
			const b = fitModel(btheb, dependence, { method: 'reml' });
			expect(b.working).toEqual(a.working);
			expect(b.beta).toEqual(a.beta);
		}
	});
});

describe('limits between models', () => {
	test('serial with noise at an endless range has the likelihood of a lasting level', () => {
		const level = fitModel(btheb, referenceModels.M1!, { method: 'reml' });
		const f = prepareModel(btheb, referenceModels.M3n!);
		const total = level.parameters.reduce((sum, p) => sum + p.value, 0);
		const noise = level.parameters.find((p) => p.name === 'residual')!.value / total;
		const x = Float64Array.of(Math.log(1e9), Math.asin(Math.sqrt(noise)));
		const moments = fitPrepared(f, { method: 'reml', start: x });
		expect(moments.logLikelihood).toBeGreaterThan(level.logLikelihood - 1e-6);
	});

	test('data whose serial part never fades are flagged, and tested as the level model', () => {
		const design = grid(40, 5, (s, v, normal) => 3 * Math.sin(7 * s * s) + 0.2 * v + normal());
		const serial = fitModel(design, model('none', 'serial-with-noise'), { method: 'reml' });
		const level = fitModel(design, model('level', 'independent'), { method: 'reml' });
		expect(serial.converged).toBe(true);
		expect(serial.logLikelihood).toBeGreaterThan(level.logLikelihood - 1e-6);
		if (serial.boundary.includes('range without end')) {
			expectWithin(serial.logLikelihood, level.logLikelihood, 1e-4);
			const [a, b] = [serial, level].map((f) => precisionOf(f, 'kenward-roger').test([0, 1, 0]));
			expectRelative(a!.df, b!.df, 1e-3);
		}
	});

	test('REML and ML come together as subjects grow', () => {
		const gap = (subjects: number) => {
			const design = grid(subjects, 4, noisy);
			const [reml, ml] = (['reml', 'ml'] as const).map((method) =>
				fitModel(design, model('level', 'independent'), { method })
			);
			return Math.abs(reml!.parameters[0]!.value / ml!.parameters[0]!.value - 1);
		};
		expect(gap(400)).toBeLessThan(gap(20) / 5);
	});
});

describe('a component at zero', () => {
	// Within subjects the ups and downs cancel: subjects are more alike than chance makes them.
	const design = grid(
		10,
		4,
		(s, v) => 10 + v + (v % 2 ? -1 : 1) * (2 + s / 3) + 0.01 * Math.sin(9 * s + v)
	);
	test('ends there, converged, flagged, with the tests of the model without it', () => {
		const fit = fitModel(design, model('level', 'independent'), { method: 'reml' });
		const without = fitModel(design, model('none', 'independent'), { method: 'reml' });
		expect(fit).toMatchObject({ converged: true, boundary: ['subject level'] });
		expect(fit.parameters[0]!.value).toBe(0);
		expect(fit.warnings[0]).toContain('the model without it');
		expectWithin(fit.logLikelihood, without.logLikelihood, 1e-9);
		for (const rule of ['kenward-roger', 'satterthwaite'] as const) {
			const [a, b] = [fit, without].map((f) => precisionOf(f, rule).test([0, 1, 0]));
			expectRelative(a!.df, b!.df, 1e-8);
			expectRelative(a!.standardError, b!.standardError, 1e-8);
			expectRelative(a!.df, design.n - design.p, 1e-8);
		}
	});
});

describe('refits and draws', () => {
	const fit = fitModel(btheb, referenceModels.M2!, { method: 'reml' });
	test('another outcome put in place gives the fit made afresh', () => {
		const y = btheb.y.map((v, i) => v + Math.sin(i));
		const warm = fitPrepared(withOutcome(fit.prepared, y), {
			method: 'reml',
			start: Float64Array.from(fit.working)
		});
		const cold = fitModel({ ...btheb, y }, referenceModels.M2!, { method: 'reml' });
		expectWithin(warm.logLikelihood, cold.logLikelihood, 1e-8);
		expect(() => withOutcome(fit.prepared, new Float64Array(3))).toThrow(
			expect.objectContaining({ code: 'shape-mismatch' })
		);
	});

	test('drawn outcomes have the mean and the covariance of the model', () => {
		const visits = fitModel(
			grid(6, 3, noisy),
			model('level', 'independent', { visitEffects: true }),
			{ method: 'reml' }
		);
		const fitted = visits.boundary.length === 0 ? visits : fit;
		const draw = outcomeDrawer(fitted);
		const mean = fittedMean(fitted);
		const normal = chance(3);
		const { from, to, covariance } = covarianceOf(fitted, 0);
		const n = to - from;
		const times = 20000;
		const sums = new Float64Array(n * n);
		for (let b = 0; b < times; b++) {
			const y = draw(normal);
			for (let i = 0; i < n; i++)
				for (let j = 0; j < n; j++)
					sums[i * n + j]! +=
						((y[from + i]! - mean[from + i]!) * (y[from + j]! - mean[from + j]!)) / times;
		}
		const shared = fitted.natural.visitRatio * fitted.scale;
		for (let i = 0; i < n; i++)
			for (let j = 0; j < n; j++) {
				const want = covariance[i * n + j]! + (i === j ? shared : 0);
				const size = Math.sqrt(
					(covariance[i * n + i]! + shared) * (covariance[j * n + j]! + shared)
				);
				// Five standard errors of a product moment, which is at most √2 of its size.
				expectWithin(sums[i * n + j]!, want, (5 * Math.SQRT2 * size) / Math.sqrt(times));
			}
	});
});

describe('refusals', () => {
	const cases: [string, ModelDesign, Dependence, RegExp][] = [
		[
			'not-identified',
			btheb,
			model('level', 'compound-symmetry'),
			/level of each subject.*compound-symmetric/
		],
		['not-identified', btheb, model('level-and-slope', 'toeplitz'), /Toeplitz/],
		[
			'not-identified',
			btheb,
			model('level-and-slope-uncorrelated', 'unstructured'),
			/unstructured/
		],
		[
			'not-identified',
			referenceDesign('orthodont', ['(Intercept)', 'visitf2', 'visitf3', 'visitf4']),
			model('level', 'independent', { visitEffects: true }),
			/categories in the mean/
		],
		[
			'one-observation-per-subject',
			grid(8, 1, noisy, 1),
			model('level', 'independent'),
			/seen once/
		],
		['one-observation-per-subject', grid(8, 1, noisy, 1), model('none', 'serial'), /seen once/],
		['too-few-subjects', grid(1, 8, noisy, 2), model('level', 'independent'), /One subject/],
		[
			'not-identified',
			grid(1, 8, noisy, 2),
			model('none', 'independent', { visitEffects: true }),
			/one subject/
		],
		['not-identified', grid(9, 2, noisy), model('level-and-slope', 'independent'), /two occasions/],
		[
			'not-identified',
			grid(9, 2, noisy),
			model('none', 'serial-with-noise'),
			/only 1 different gap/
		],
		['not-identified', grid(9, 2, noisy), model('level', 'serial'), /only 1 different gap/],
		[
			'too-few-subjects',
			grid(4, 5, noisy),
			model('none', 'unstructured'),
			/more subjects than visits/
		],
		['constant-outcome', grid(6, 4, () => 7), model('level', 'independent'), /same/],
		['perfect-fit', grid(6, 4, (_, v) => 7 + v), model('level', 'independent'), /reproduces/],
		[
			'no-residual-variation',
			grid(6, 4, (s, v) => Math.sin(s) + v),
			model('level', 'independent'),
			/residual/
		],
		['too-few-observations', grid(1, 2, noisy), model('none', 'independent'), /cannot carry/],
		['bad-option', { ...grid(6, 4, noisy), visits: [] }, model('none', 'toeplitz'), /visit column/],
		[
			'bad-option',
			{ ...grid(6, 4, noisy), groups: [] },
			model('none', 'independent', { varianceBy: 'group' }),
			/group column/
		],
		['not-finite', grid(6, 4, (s) => (s === 2 ? NaN : s)), model('level', 'independent'), /finite/],
		[
			'not-finite',
			grid(6, 4, (s) => (s === 2 ? Infinity : s)),
			model('none', 'independent'),
			/finite/
		]
	];
	test.each(cases)('%s %#', (code, design, dependence, sentence) => {
		for (const method of ['reml', 'ml'] as const) {
			let thrown: unknown;
			try {
				fitModel(design, dependence, { method });
			} catch (error) {
				thrown = error;
			}
			expect(thrown).toBeInstanceOf(StatsError);
			expect((thrown as StatsError).code).toBe(code);
			expect((thrown as StatsError).message).toMatch(sentence);
			expect((thrown as StatsError).message).toMatch(/\.$/);
		}
	});

	test('a mean that takes up all there is between subjects, or between visits', () => {
		expect(() =>
			fitModel(grid(2, 6, noisy), model('level', 'independent'), { method: 'reml' })
		).toThrow(/2 subjects cannot carry 2 coefficients/);
		const two = grid(8, 2, noisy);
		expect(() =>
			fitModel(two, model('none', 'independent', { visitEffects: true }), { method: 'reml' })
		).toThrow(/2 coefficients for 2 visits/);
	});

	test('level, serial errors and noise need three different gaps', () => {
		expect(() =>
			fitModel(grid(20, 3, noisy), model('level', 'serial-with-noise'), { method: 'reml' })
		).toThrow(/only 2 different gaps.*a lasting level, serial errors and measurement noise/);
		expect(
			fitModel(grid(20, 4, noisy), model('level', 'serial-with-noise'), { method: 'reml' })
				.converged
		).toBe(true);
	});

	test('a pair of visits that nobody has, and a lag', () => {
		const whole = grid(12, 3, noisy);
		const keep = [...whole.rowOf].filter((i) => {
			const s = Math.floor(i / 3);
			return s % 2 ? i % 3 !== 0 : i % 3 !== 2;
		});
		const start = Int32Array.from({ length: 13 }, (_, s) => 2 * s);
		const cut: ModelDesign = {
			...whole,
			n: keep.length,
			x: Float64Array.from([0, 1, 2].flatMap((j) => keep.map((i) => whole.x[j * whole.n + i]!))),
			y: Float64Array.from(keep, (i) => whole.y[i]!),
			time: Float64Array.from(keep, (i) => whole.time[i]!),
			visit: Int32Array.from(keep, (i) => whole.visit[i]!),
			rowOf: Int32Array.from(keep.keys()),
			subjectStart: start
		};
		expect(() => fitModel(cut, model('none', 'unstructured'), { method: 'reml' })).toThrow(
			/visit 1 and visit 3/
		);
		expect(() => fitModel(cut, model('none', 'toeplitz'), { method: 'reml' })).toThrow(/2 apart/);
	});

	test('Kenward–Roger is refused under ML', () => {
		const fit = fitModel(btheb, referenceModels.M1!, { method: 'ml' });
		expect(() => precisionOf(fit, 'kenward-roger')).toThrow(
			expect.objectContaining({ code: 'kenward-roger-needs-reml' })
		);
	});

	test('a stop that is asked for is heeded, and progress never falls', () => {
		expect(() =>
			fitModel(btheb, referenceModels.M4!, { method: 'reml', shouldStop: () => true })
		).toThrow(expect.objectContaining({ code: 'stopped' }));
		const told: number[] = [];
		fitModel(btheb, referenceModels.M4!, { method: 'reml', onProgress: (f) => told.push(f) });
		expect(told).toEqual([...told].sort((a, b) => a - b));
		expect(told.at(-1)).toBe(1);
	});
});

describe('small and odd data end in a flagged result or a typed error, never in NaN', () => {
	const structures: ErrorStructure[] = [
		'independent',
		'serial',
		'serial-with-noise',
		'compound-symmetry',
		'toeplitz',
		'unstructured'
	];
	const effects: SubjectEffects[] = [
		'none',
		'level',
		'level-and-slope',
		'level-and-slope-uncorrelated',
		'slope'
	];
	test('any model on any small design', () => {
		fc.assert(
			fc.property(
				fc.integer({ min: 1, max: 7 }),
				fc.integer({ min: 1, max: 5 }),
				fc.constantFrom(...structures),
				fc.constantFrom(...effects),
				fc.boolean(),
				fc.constantFrom('none' as const, 'visit' as const, 'group' as const),
				fc.constantFrom('time' as const, 'visit' as const),
				fc.constantFrom<(s: number, v: number, normal: () => number) => number>(
					noisy,
					(s, v) => s + v,
					(s, v) => Math.round(Math.sin(s * 3 + v * 7)),
					(_, __, normal) => 1e-30 * normal(),
					(_, v, normal) => 1e12 + v + normal(),
					(s, _, normal) => (s === 0 ? 1e9 * normal() : normal())
				),
				(subjects, visits, structure, subjectEffects, visitEffects, varianceBy, along, outcome) => {
					const design = grid(subjects, visits, outcome, visits === 1 ? 1 : 2);
					const dependence = model(subjectEffects, structure, { visitEffects, varianceBy, along });
					try {
						const fit = fitModel(design, dependence, { method: 'reml' });
						const numbers = [
							fit.logLikelihood,
							fit.gradient,
							...fit.beta,
							...fit.se,
							...fit.parameters.map((p) => p.value)
						];
						expect(numbers.filter((v) => !Number.isFinite(v))).toEqual([]);
						for (const rule of ['naive', 'satterthwaite', 'kenward-roger'] as const) {
							try {
								const t = precisionOf(fit, rule).test(
									design.names.map((_, j) => (j === 0 ? 1 : 0))
								);
								expect(Object.entries(t).filter(([, v]) => !Number.isFinite(v))).toEqual([]);
							} catch (error) {
								if (!(error instanceof StatsError)) throw error;
							}
						}
					} catch (error) {
						if (!(error instanceof StatsError)) throw error;
						expect(error.message).toMatch(/\.$/);
					}
				}
			),
			{ numRuns: 400, seed: 20261201 }
		);
	});
});

test('finite outcomes whose squares overflow are too large, not “not finite”', () => {
	const huge = grid(6, 4, (s, v) => 1e200 * (1 + s + ((s * 7 + v * 3) % 5)));
	expect(() => fitModel(huge, model('level', 'independent'), { method: 'reml' })).toThrow(
		expect.objectContaining({ code: 'out-of-range' })
	);
});
