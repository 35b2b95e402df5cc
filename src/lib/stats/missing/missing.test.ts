import { describe, expect, test } from 'vitest';
import type { Columns } from '../design/columns.js';
import { randomStream } from '../numeric/random.js';
import { dropoutByGroup } from './dropout.js';
import { historyTest } from './history.js';
import { occasionsOf } from './occasions.js';
import { missingPatterns } from './patterns.js';

const plan = { outcome: 'y', subject: 'id', time: 't', visit: 'v', group: 'arm' };

/** One line a subject: its group, then its outcome at each visit; null is a miss, undefined no row. */
function longForm(table: readonly [number, ...(number | null | undefined)[]][]): Columns {
	const columns = {
		id: [] as number[],
		t: [] as number[],
		v: [] as number[],
		arm: [] as number[],
		y: [] as (number | null)[]
	};
	table.forEach(([arm, ...outcomes], s) =>
		outcomes.forEach((y, v) => {
			if (y === undefined) return;
			columns.id.push(s);
			columns.t.push(v / 2);
			columns.v.push(v + 1);
			columns.arm.push(arm);
			columns.y.push(y);
		})
	);
	return columns;
}

const trial = longForm([
	[0, 5, 6, 7],
	[0, 4, undefined, 6],
	[0, 3, 2, null],
	[0, 8, null, undefined],
	[1, 5, 5, 5],
	[1, 6, 7, 8],
	[1, null, 7, undefined],
	[1, null, undefined, undefined],
	[1, 9, 9, 9]
]);

describe('patterns', () => {
	test('count subjects by what was observed, most frequent first', () => {
		const table = missingPatterns(occasionsOf(trial, plan)).map((p) => [
			p.states.map((s) => (s === 'observed' ? 'o' : s === 'missing' ? 'm' : '-')).join(''),
			p.kind,
			p.subjects,
			...p.byGroup
		]);
		expect(table).toEqual([
			['ooo', 'complete', 4, 1, 3],
			['oom', 'dropout', 1, 1, 0],
			['omo', 'gap', 1, 1, 0],
			['omm', 'dropout', 1, 1, 0],
			['mom', 'gap-and-dropout', 1, 0, 1],
			['mmm', 'never', 1, 0, 1]
		]);
	});

	test('take only rows as due when visits are still to come', () => {
		const table = missingPatterns(occasionsOf(trial, plan, 'rows')).map((p) => [
			p.states.map((s) => (s === 'observed' ? 'o' : s === 'missing' ? 'm' : '-')).join(''),
			p.kind
		]);
		expect(table).toEqual([
			['ooo', 'complete'],
			['oom', 'dropout'],
			['om-', 'dropout'],
			['o-o', 'complete'],
			['mo-', 'gap'],
			['m--', 'never']
		]);
	});

	test.each([
		['bad-plan', trial, { ...plan, visit: null }],
		[
			'repeated-occasion',
			{ ...trial, v: trial.v!.length ? Array.from(trial.v!, () => 1) : [] },
			plan
		],
		['missing-subject', { ...trial, id: Array.from(trial.id!, () => null) }, plan],
		['group-changes', { ...trial, arm: Array.from(trial.arm!, (_, i) => i % 2) }, plan]
	])('refuse %s', (code, data, bad) => {
		expect(() => occasionsOf(data, bad)).toThrow(expect.objectContaining({ code }));
	});
});

describe('dropout by group', () => {
	test('counts who was never seen again, and what remains', () => {
		const { groups } = dropoutByGroup(occasionsOf(trial, plan));
		expect(groups).toEqual([
			{
				group: '0',
				steps: [
					{ from: '1', atRisk: 4, dropped: 1, remaining: 0.75 },
					{ from: '2', atRisk: 3, dropped: 1, remaining: expect.closeTo(0.5, 12) }
				]
			},
			{
				group: '1',
				steps: [
					{ from: '1', atRisk: 4, dropped: 0, remaining: 1 },
					{ from: '2', atRisk: 4, dropped: 1, remaining: 0.75 }
				]
			}
		]);
	});

	test('compares the groups by the hypergeometric sum over visits', () => {
		// By hand: visit 1 expects 4·1/8 in group 1, visit 2 expects 4·2/7; the variances are 1·7·(1/2)(1/2)/7 and
		// 2·5·(4/7)(3/7)/6.
		const excess = 0 - 0.5 + (1 - 8 / 7);
		const variance = 0.25 + (10 / 6) * (12 / 49);
		const { comparison } = dropoutByGroup(occasionsOf(trial, plan));
		expect(comparison!.df).toBe(1);
		expect(comparison!.statistic).toBeCloseTo(excess ** 2 / variance, 12);
	});

	test('has nothing to compare with one group, or when all stay', () => {
		expect(dropoutByGroup(occasionsOf(trial, { ...plan, group: null })).comparison).toBeNull();
		const whole = longForm([
			[0, 1, 2],
			[1, 1, 3]
		]);
		expect(dropoutByGroup(occasionsOf(whole, plan)).comparison).toBeNull();
	});
});

describe('the test of missing by outcome history', () => {
	test('adds the excess of the last outcome over visits and groups', () => {
		// Group 0, visit 1: 5 4 3 8 seen, 8 left; visit 2: 6 2 seen, 2 left. Group 1, visit 2: 5 7 7 9 seen, the second left.
		const result = historyTest(occasionsOf(trial, plan))!;
		const score = 8 - 5 + (2 - 4) + (7 - 7);
		const variance = (3 * 14) / (4 * 3) + (1 * 8) / (2 * 1) + (3 * 8) / (4 * 3);
		expect(result).toMatchObject({ left: 3, atRisk: 10 });
		expect(result.z).toBeCloseTo(score / Math.sqrt(variance), 12);
		expect(result.meanDifference).toBeCloseTo(score / 3, 12);
	});

	test('says nothing when nobody left, or all did', () => {
		const table = longForm([
			[0, 1, 2],
			[1, 1, 3]
		]);
		expect(historyTest(occasionsOf(table, plan))).toBeNull();
	});

	/** 60 subjects, 4 visits; leaving after each depends on the outcome by `dependence`. */
	function simulated(seed: number, dependence: number) {
		const random = randomStream(seed);
		return longForm(
			Array.from({ length: 60 }, (_, s) => {
				const level = random.normal();
				const row: [number, ...(number | null)[]] = [s % 2];
				let there = true;
				for (let v = 0; v < 4; v++) {
					const y = level + random.normal();
					row.push(there ? y : null);
					if (random.uniform() < 1 / (1 + Math.exp(1.5 - dependence * y))) there = false;
				}
				return row;
			})
		);
	}

	test('rejects as often as it should when leaving is by chance, and nearly always when it is not', () => {
		const sets = 1000;
		const share = (dependence: number) =>
			Array.from({ length: sets }, (_, seed) =>
				historyTest(occasionsOf(simulated(seed, dependence), plan))!.p < 0.05 ? 1 : 0
			).reduce<number>((a, b) => a + b, 0) / sets;
		expect(Math.abs(share(0) - 0.05)).toBeLessThan(3 * Math.sqrt((0.05 * 0.95) / sets));
		expect(share(1.5)).toBeGreaterThan(0.95);
	});
});
