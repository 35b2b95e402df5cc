import { describe, expect, test } from 'vitest';
import { carryOut } from '../analysis/analyse.js';
import * as contrasts from '../design/contrasts.js';
import { randomStream } from '../numeric/random.js';
import { readPlan } from '../read-plan.js';
import { expectRelative, expectWithin } from '../reference/close.js';
import { fittedRows } from './conditional-fit.js';
import { fittedLines } from './lines.js';
import { subjectEffects, visitEffects } from './subject-effects.js';

/** 24 subjects in two arms, 5 visits with a shared effect each; level, slope and error of sd 3, 0.6 and 1. */
function trial(time = (t: number) => t, outcome = (y: number) => y) {
	const random = randomStream(31);
	const shared = Array.from({ length: 5 }, () => 0.8 * random.normal());
	const columns = { id: [], t: [], v: [], arm: [], y: [] } as Record<string, (number | string)[]>;
	for (let s = 0; s < 24; s++) {
		const [level, slope] = [3 * random.normal(), 0.6 * random.normal()];
		for (let t = 0; t < 5; t++) {
			columns.id!.push(s);
			columns.t!.push(time(t));
			columns.v!.push(`v${t}`);
			columns.arm!.push(s % 2 ? 'b' : 'a');
			const y = 30 + level + (1 + slope + (s % 2)) * t + shared[t]! + random.normal();
			columns.y!.push(outcome(y));
		}
	}
	return columns;
}

const analysisOf = (change: object, columns = trial()) =>
	carryOut(
		columns,
		readPlan({ outcome: 'y', subject: 'id', time: 't', visit: 'v', group: 'arm', ...change }),
		{ componentLimits: false }
	);

describe('fitted lines', () => {
	test('follow a polynomial, and their limits are those of the contrast there', () => {
		const analysis = analysisOf({ mean: { time: { degree: 3 } } });
		const [first, second] = fittedLines(analysis, { times: [0, 2.5, 6], confidence: 0.9 });
		expect([first!.group, second!.group]).toEqual(['a', 'b']);
		const at = contrasts.meanAt(analysis.built, 'b', { time: 2.5 });
		expect(second!.points[1]).toEqual({
			time: 2.5,
			visit: null,
			...(({ estimate, lower, upper }) => ({ estimate, lower, upper }))(
				analysis.precision.test(at.inside, 0.9)
			)
		});
		expect(fittedLines(analysis)[0]!.points.length).toBe(25);
		expect(fittedLines(analysis)[0]!.points.at(-1)!.time).toBe(4);
		expect(() => fittedLines(analysis, { confidence: 1 })).toThrow(/between 0 and 1/);
		expect(() => fittedLines(analysis, { times: [NaN] })).toThrow(/not finite/);
	});

	test('have a point for each visit where visits are categories: the mean of complete data', () => {
		const columns = trial();
		const analysis = analysisOf({ mean: { time: 'categorical' } }, columns);
		const [, b] = fittedLines(analysis);
		expect(b!.points.map((p) => p.visit)).toEqual(['v0', 'v1', 'v2', 'v3', 'v4']);
		const own = columns.y!.filter((_, i) => columns.arm![i] === 'b' && columns.v![i] === 'v3');
		const mean = own.reduce((sum: number, y) => sum + Number(y), 0) / own.length;
		expectRelative(b!.points[3]!.estimate, mean, 1e-9);
	});

	test('are medians above zero on a log scale', () => {
		const analysis = analysisOf(
			{ scale: 'log' },
			trial(undefined, (y) => Math.exp(y / 10))
		);
		const plain = analysisOf(
			{},
			trial(undefined, (y) => y / 10)
		);
		const [line] = fittedLines(analysis, { times: [1] });
		const [same] = fittedLines(plain, { times: [1] });
		for (const name of ['estimate', 'lower', 'upper'] as const)
			expectRelative(line!.points[0]![name], Math.exp(same!.points[0]![name]), 1e-8);
	});
});

describe('predictions of effects', () => {
	const change = { subjectEffects: 'level-and-slope', visitEffects: true };
	const near = analysisOf(change);

	test('do not lose their digits when time is counted in milliseconds from far away', () => {
		const year = 365.25 * 86_400_000;
		const origin = 50 * year;
		const far = analysisOf(
			change,
			trial((t) => origin + t * year)
		);
		const [a, b] = [fittedRows(near.fit), fittedRows(far.fit)];
		for (let i = 0; i < 120; i++) {
			expectWithin(b.fitted[i]!, a.fitted[i]!, 1e-5);
			expectWithin(b.conditional[i]!, a.conditional[i]!, 1e-5);
		}
		near.built.design.subjects.forEach((_, s) => {
			const slope = a.effects![s]!.slope!;
			const same = b.effects![s]!.slope!;
			expectWithin(same.estimate * year, slope.estimate, 1e-5);
			expectRelative(same.conditionalSe * year, slope.conditionalSe, 1e-4);
			expectRelative(same.predictionSe * year, slope.predictionSe, 1e-4);
		});
	});

	test('of subjects and of visits add up to nothing over complete, balanced data', () => {
		const effects = subjectEffects(near.fit);
		const visits = visitEffects(near.fit);
		const scale = effects[0]!.level!.predictionSe;
		for (const arm of [0, 1]) {
			const mine = effects.filter((_, s) => s % 2 === arm);
			expectWithin(
				mine.reduce((sum, e) => sum + e.level!.estimate, 0),
				0,
				1e-7 * scale
			);
			expectWithin(
				mine.reduce((sum, e) => sum + e.slope!.estimate, 0),
				0,
				1e-7 * scale
			);
		}
		expect(visits.map((v) => v.visit)).toEqual(['v0', 'v1', 'v2', 'v3', 'v4']);
		expectWithin(
			visits.reduce((sum, v) => sum + v.estimate, 0),
			0,
			1e-7 * scale
		);
		for (const { conditionalSe, predictionSe } of [...visits, ...effects.map((e) => e.level!)])
			expect(predictionSe).toBeGreaterThanOrEqual(conditionalSe);
	});

	test('are zero where the variance is estimated as zero', () => {
		const flat = trial();
		flat.y = flat.y!.map((_, i) => (i % 2 ? 1 : -1) * (2 + (i % 7) / 3));
		const { fit } = analysisOf({ visitEffects: true }, flat);
		expect(fit.boundary).toContain('subject level');
		for (const { level } of subjectEffects(fit))
			expect(level).toEqual({ estimate: 0, conditionalSe: 0, predictionSe: 0 });
	});

	test('are refused of a model without them; its residuals are then of one kind', () => {
		const { fit } = analysisOf({ subjectEffects: 'none' });
		expect(() => subjectEffects(fit)).toThrow(
			expect.objectContaining({ code: 'no-subject-effect' })
		);
		expect(() => visitEffects(fit)).toThrow(expect.objectContaining({ code: 'bad-option' }));
		const rows = fittedRows(fit);
		expect(rows.effects).toBeNull();
		expect([...rows.conditional]).toEqual([...rows.marginal]);
	});

	test('one subject under serial errors has residuals and nothing lasting', () => {
		const one = trial();
		const rows = (name: string) => one[name]!.slice(0, 5);
		const { fit } = carryOut(
			{ id: rows('id'), t: rows('t'), y: rows('y') },
			readPlan({
				outcome: 'y',
				subject: 'id',
				time: 't',
				mean: { time: 'none' },
				degreesOfFreedom: 'naive',
				subjectEffects: 'none',
				errors: { structure: 'serial' }
			}),
			{ componentLimits: false }
		);
		expect([...fittedRows(fit).conditional].every(Number.isFinite)).toBe(true);
	});
});
