import { describe, expect, test } from 'vitest';
import type { ModelDesign } from '../design/model-design.js';
import { StatsError } from '../errors.js';
import { prepareModel, withOutcome } from '../fit/prepare-model.js';
import { searchModel } from '../fit/search-model.js';
import { readPlan } from '../read-plan.js';
import { randomStream } from '../numeric/random.js';
import { drawerOf } from './draw.js';
import { evidence, gatherEvidence, planEvidenceOf } from './evidence.js';
import { fading, inventStudy, lasting, type Truth } from './example.js';
import { noLessThanWithin, planEvidence } from './plan-evidence.js';
import { evidencePart } from './refits.js';
import type { ComparisonName, EvidenceResult } from './types.js';

/** Seeds were fixed before the first run; `tests/proof/evidence.test.ts` does the same at length. */
const SEED = 20261201;
const study = (truth: Truth, subjects: number, visits: number, k: number) =>
	inventStudy(truth, subjects, visits, [SEED, k]);
const short = { refits: 100, seed: SEED };
const p = (result: EvidenceResult, name: ComparisonName) =>
	result.comparisons.find((c) => c.name === name)!;

describe('what the data tell of dependence', () => {
	test('5 subjects × 4 visits of lag-1 correlation 0.5 are mostly too short to tell', () => {
		const verdicts = [lasting, fading].flatMap((truth, kind) =>
			Array.from(
				{ length: 10 },
				(_, k) => evidence(study(truth, 5, 4, 100 * kind + k), short).answers.verdict
			)
		);
		expect(verdicts.filter((v) => v === 'too-short').length).toBeGreaterThan(10);
	});

	test.each([
		['lasting', lasting, 60, 9],
		['fading', fading, 60, 9],
		['lasting', lasting, 240, 4],
		['fading', fading, 240, 4]
	] as const)('%s, lag-1 correlation 0.5, %#: the right kind', (kind, truth, subjects, visits) => {
		const { answers, comparisons } = evidence(study(truth, subjects, visits, 300), short);
		expect(answers.verdict).toBe(kind);
		expect(answers.standing).toEqual([kind === 'lasting' ? 'level' : 'serial']);
		expect(answers.lastingOffset).toBe(kind === 'lasting' ? 'yes' : 'no');
		expect(comparisons.every((c) => c.failed === 0)).toBe(true);
	});

	test('a single subject × 40 visits never claims a lasting offset', () => {
		for (const [kind, truth] of [lasting, fading].entries())
			for (let k = 0; k < 5; k++) {
				const result = evidence(study(truth, 1, 40, 400 + 10 * kind + k), short);
				expect(result.answers.verdict).toBe('too-short');
				expect(result.answers.lastingOffset).toBe('too-short');
				expect(result.answers.standing).not.toContain('level');
				expect(result.sentences.join(' ')).toMatch(/nothing is claimed of lasting offsets/);
			}
	});

	test('independent rows of many subjects: no dependence, and none is claimed', () => {
		const { answers, sentences } = evidence(study({}, 120, 5, 500), short);
		expect(answers).toMatchObject({ verdict: 'none', lastingOffset: 'no', fading: 'no' });
		expect(sentences[0]).toMatch(/^No dependence within subjects is seen/);
	});

	test('visits that move everyone are seen, and then stand beside every kind', () => {
		const result = evidence(study({ ...lasting, visit: 0.5 }, 80, 6, 501), short);
		expect(result.answers).toMatchObject({ verdict: 'lasting', together: 'yes' });
		expect(result.answers.standing).toEqual(['level+visit']);
		expect(result.visitsInAll).toBe(true);
		expect(result.effectiveSampleSize.mean.highest).toBeLessThan(80);
	});

	test('a lasting offset and fading errors at once are both seen', () => {
		const both = evidence(study({ level: 2, serial: 2, rho: 0.5, noise: 0 }, 80, 7, 502), short);
		expect(both.answers).toMatchObject({ verdict: 'lasting-and-fading', fading: 'yes' });
	}, 120_000);

	test('slopes of subjects are not taken for fading', () => {
		const drift = evidence(study({ level: 1, slope: 0.2 }, 60, 6, 503), short);
		expect(drift.answers).toMatchObject({ verdict: 'drifting', lastingOffset: 'yes' });
		expect(p(drift, 'slope beside level').mixture!.p).toBeLessThan(1e-6);
	}, 120_000);
});

describe('the refits', () => {
	const design = study(lasting, 20, 5, 600);
	const plan = planEvidence(design, short);

	test('give the same bits however they are split, in whatever order', () => {
		const whole = gatherEvidence(plan, [evidencePart(plan, 0, 100)]);
		const cuts = [100, 71, 70, 13, 0];
		const parts = cuts.slice(1).map((from, i) => evidencePart(plan, from, cuts[i]!));
		expect(JSON.stringify(gatherEvidence(plan, parts))).toBe(JSON.stringify(whole));
		expect(JSON.stringify(evidence(design, short))).toBe(JSON.stringify(whole));
		expect(JSON.stringify(evidence(design, { ...short, seed: 1 }))).not.toBe(JSON.stringify(whole));
	});

	test('a plan crosses threads: a structured clone of it gives the same part', () => {
		const part = evidencePart(structuredClone(plan), 40, 60);
		expect(part).toEqual(evidencePart(plan, 40, 60));
	});

	test('find the likelihood that a search from every starting point finds', () => {
		const part = evidencePart(plan, 0, 12);
		for (const [w, world] of plan.worlds.entries()) {
			const prepared = (id: string) =>
				prepareModel(design, plan.members.find((m) => m.member.id === id)!.member.dependence);
			const draw = drawerOf(prepared(world.from), 'reml', world.working);
			for (let k = 0; k < 12; k++) {
				const y = draw(randomStream(SEED, world.number * 2 ** 32 + k).normal);
				const found = new Map<string, number>();
				world.refit.forEach((id, m) => {
					const { member } = plan.members.find((each) => each.member.id === id)!;
					const search = searchModel(withOutcome(prepared(id), y), 'reml');
					const value = noLessThanWithin(-search.deviance / 2, member, found);
					found.set(id, value);
					expect(Math.abs(part.worlds[w]!.logLikelihood[m]![k]! - value)).toBeLessThan(2e-5);
				});
			}
		}
	}, 120_000);

	test('that fail are counted, reported, and go against every claim', () => {
		const part = evidencePart(plan, 0, 100);
		const level = plan.worlds.findIndex((world) => world.id === 'serial');
		const column = plan.worlds[level]!.refit.indexOf('level');
		const before = gatherEvidence(plan, [part]);
		for (let k = 0; k < 30; k++) part.worlds[level]!.failed[column]![k] = 1;
		const after = gatherEvidence(plan, [part]);
		expect(p(after, 'level over serial').failed).toBe(30);
		expect(p(after, 'level over serial').p).toBeGreaterThanOrEqual(
			p(before, 'level over serial').p
		);
		expect(p(after, 'level over serial').p).toBeGreaterThanOrEqual(31 / 101);
		expect(after.refitted.failed).toBe(30);
		expect(after.sentences.join(' ')).toMatch(/30 refits did not converge/);
	});

	test('tell progress and stop when asked', () => {
		const told: number[] = [];
		evidence(design, { ...short, onProgress: (f) => told.push(f) });
		expect(told).toEqual([...told].sort((a, b) => a - b));
		expect([told[0], told.at(-1)]).toEqual([0, 1]);
		let asked = 0;
		expect(() => evidence(design, { ...short, shouldStop: () => ++asked > 500 })).toThrow(
			expect.objectContaining({ code: 'stopped' })
		);
	});

	test('parts that do not make up the whole are refused', () => {
		const part = (from: number, to: number) => evidencePart(plan, from, to);
		expect(() => gatherEvidence(plan, [part(0, 10), part(11, 12)])).toThrow(StatsError);
		expect(() => gatherEvidence(plan, [part(0, 10)])).toThrow(/0 to 10 of 100/);
		expect(() => gatherEvidence(plan, [])).toThrow(StatsError);
		expect(() => part(5, 101)).toThrow(StatsError);
	});
});

describe('p-values', () => {
	/** Fractions of invented data sets, of the very model that is held, with p at or below a level. */
	test('of visit variance and of level against serial keep their size under the model itself', () => {
		const small: Record<string, number> = {};
		const count = 20;
		for (let k = 0; k < count; k++) {
			const result = evidence(study(lasting, 12, 4, 700 + k), short);
			for (const name of ['visit beside level', 'serial over level', 'more than level'] as const)
				if (p(result, name).p <= 0.2) small[name] = (small[name] ?? 0) + 1;
		}
		// Nominal 0.2: three standard errors of 20 data sets are 0.27.
		for (const name of ['visit beside level', 'serial over level', 'more than level'])
			expect((small[name] ?? 0) / count, name).toBeLessThan(0.2 + 0.27);
	}, 120_000);

	test('of an offset agree with the mixture at the edge, in large samples', () => {
		const result = evidence(study({ level: 0.05 }, 60, 5, 800), { refits: 200, seed: SEED });
		const c = p(result, 'level over independent');
		expect(Math.abs(c.p - c.mixture!.p!)).toBeLessThan(4 * c.monteCarloError + 0.01);
	});
});

describe('what is told', () => {
	const design = study(lasting, 30, 5, 900);
	const result = evidence(design, {
		...short,
		contrast: { name: 'difference in slopes', weights: [0, 0, 0, 1] }
	});

	test('is plain data that JSON holds, with no number that is none', () => {
		const text = JSON.stringify(result);
		expect(JSON.parse(text)).toEqual(result);
		expect(text).not.toMatch(/NaN|Infinity/);
	});

	test('whole sentences, with the effective sample sizes of the mean and the contrast', () => {
		for (const sentence of result.sentences) expect(sentence).toMatch(/^[A-Z“].*\.$/s);
		const sizes = result.sentences.find((s) => s.includes('independent rows'))!;
		expect(sizes).toMatch(/^The 150 rows of 30 subjects tell as much about the mean as /);
		expect(sizes).toContain('“difference in slopes”');
		const level = result.models.find((m) => m.id === 'level')!;
		expect(level.fitted && level.effectiveSampleSize.mean).toBeGreaterThan(30);
		expect(level.fitted && level.effectiveSampleSize.mean).toBeLessThan(150);
	});

	test('a larger model never has the lower likelihood by more than where searches end', () => {
		const of = (id: string) => {
			const model = result.models.find((m) => m.id === id)!;
			return model.fitted ? model.logLikelihood : NaN;
		};
		for (const [small, large] of [
			['independent', 'level'],
			['level', 'level+slope'],
			['level', 'level+serial'],
			['serial', 'level+serial'],
			['level+serial', 'level+serial+noise'],
			['level', 'level+visit']
		] as const)
			expect(of(large)).toBeGreaterThan(of(small) - 1e-6);
	});

	test('models that the design cannot carry come with the sentence that says why', () => {
		const once = study(lasting, 20, 1, 901);
		const flat: ModelDesign = { ...once, x: once.x.slice(0, once.n), p: 1, names: ['intercept'] };
		const { answers, models, sentences } = evidence(flat, short);
		expect(answers).toMatchObject({ lastingOffset: 'not-asked', fading: 'not-asked' });
		const level = models.find((m) => m.id === 'level')!;
		expect(level.fitted ? '' : level.reason).toMatch(/Each subject was seen once/);
		expect(sentences.join(' ')).toMatch(/Each subject was seen once/);
	});

	test('options that cannot be are refused, and so is an outcome that does not vary', () => {
		expect(() => evidence(design, { refits: 99 })).toThrow(/from 100 to 1,000,000, not 99/);
		expect(() => evidence(design, { seed: -1 })).toThrow(StatsError);
		expect(() => evidence(design, { contrast: { name: 'odd', weights: [1] } })).toThrow(
			/1 weights for 4 columns/
		);
		const constant = { ...design, y: new Float64Array(design.n).fill(3) };
		expect(() => evidence(constant, short)).toThrow(
			expect.objectContaining({ code: 'constant-outcome' })
		);
	});

	test('two occasions cannot tell an offset from fading, and that is what is said', () => {
		const { answers } = evidence(study(lasting, 60, 2, 902), short);
		expect(answers).toMatchObject({ verdict: 'too-short', lastingOffset: 'too-short' });
	});
});

test('columns and a plan become a plan of the evidence, with a contrast by its name', () => {
	const n = 40;
	const at = (f: (i: number) => number) => Float64Array.from({ length: n }, (_, i) => f(i));
	const random = randomStream(SEED, 1000);
	const columns = {
		who: Array.from({ length: n }, (_, i) => `s${Math.floor(i / 4)}`),
		t: at((i) => i % 4),
		arm: Array.from({ length: n }, (_, i) => (Math.floor(i / 4) % 2 ? 'b' : 'a')),
		y: at((i) => (i % 4) + random.normal())
	};
	const plan = readPlan({
		outcome: 'y',
		subject: 'who',
		time: 't',
		group: 'arm',
		contrasts: [{ name: 'difference', weights: { 'time × group b': 1 } }]
	});
	const made = planEvidenceOf(columns, plan, { refits: 100 });
	expect(made.contrast).toBe('difference');
	expect(made.design.n).toBe(n);
	expect(() => planEvidenceOf(columns, plan, { contrast: 'other' })).toThrow(
		/no contrast named “other”/
	);
});
