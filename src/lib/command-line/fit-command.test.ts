import { mkdtempSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, test } from 'vitest';
import type { AnalysisResult } from '$lib/stats';
import { analyse, readPlan } from '$lib/stats';
import { columnsOfPlan, fitCommand } from './fit-command';
import { alignedRows, digits } from './table';

const folder = mkdtempSync(join(tmpdir(), 'heddle-fit-'));
const keep = (name: string, content: string | object) => {
	const path = join(folder, name);
	writeFileSync(path, typeof content === 'string' ? content : JSON.stringify(content));
	return path;
};

/** Twelve subjects seen four times, two arms, by a rule that leaves something over. */
const lines = Array.from({ length: 48 }, (_, i) => {
	const [s, t] = [Math.floor(i / 4), i % 4];
	const y = 20 + 2 * t + (s % 2) * t + ((s * 7) % 5) + ((i * 13) % 7) / 4;
	return `${String(s).padStart(3, '0')},${t},${s % 2},${i === 5 ? 'NA' : y}`;
});
const data = keep('data.csv', `id,t,arm,y\n${lines.join('\n')}\n`);
const plan = {
	outcome: 'y',
	subject: 'id',
	time: 't',
	group: 'arm',
	contrasts: [{ name: 'difference at 3', weights: { 'group 1': 1, 'time × group 1': 3 } }]
};
const good = keep('plan.json', plan);

describe('heddle fit', () => {
	test('prints one JSON document with everything a reader needs', () => {
		const { status, output, complaint } = fitCommand(['--plan', good, data]);
		expect([status, complaint]).toEqual([0, '']);
		const result = JSON.parse(output) as AnalysisResult;
		expect(result.coefficients.map((c) => c.name)).toEqual([
			'intercept',
			'time',
			'group 1',
			'time × group 1'
		]);
		expect(Object.keys(result.coefficients[0]!)).toEqual(
			expect.arrayContaining(['name', 'estimate', 'se', 'df', 't', 'p', 'lower', 'upper'])
		);
		expect(result).toMatchObject({
			observations: 47,
			subjects: 12,
			dropped: [{ reason: 'outcome', variable: 'y', rows: 1 }],
			converged: true,
			contrasts: [{ name: 'difference at 3', weights: [0, 0, 1, 3] }],
			plan: { method: 'reml', degreesOfFreedom: 'kenward-roger' }
		});
		expect(result.gradientNorm).toBeLessThan(1e-4);
	});

	test('prints a table when asked', () => {
		const { status, output } = fitCommand(['--table', data, '--plan', good]);
		expect(status).toBe(0);
		expect(output).toMatch(/^y: 47 rows of 12 subjects, REML/);
		expect(output).toMatch(/Left out: 1 without an outcome in “y”/);
		for (const name of ['time × group 1', 'difference at 3', 'subject level', 'residual', 'AIC'])
			expect(output).toMatch(new RegExp(`^${name}`, 'm'));
		expect(output).not.toMatch(/NaN|undefined|null/);
	});

	test('that did not converge prints its numbers, complains and ends with status 2', () => {
		const astray: typeof analyse = (columns, read) => ({
			...analyse(columns, read),
			converged: false
		});
		const { status, output, complaint } = fitCommand(['--plan', good, data], astray);
		expect(status).toBe(2);
		expect(JSON.parse(output)).toMatchObject({ converged: false, observations: 47 });
		expect(complaint).toMatch(/^The fit did not converge: .*relied on\.\n$/);
	});

	test('prints ratios on a log scale', () => {
		const log = keep('log.json', { ...plan, scale: 'log' });
		expect(fitCommand(['--plan', log, data, '--table']).output).toMatch(/to +ratio +95 % from/);
	});

	test.each<[string, () => string[], RegExp]>([
		['no argument', () => [], /^No plan is named; it is used as/],
		['no data', () => ['--plan', good], /^One file of data must be named/],
		['two files of data', () => ['--plan', good, data, data], /^One file of data/],
		['an unknown option', () => ['--plan', good, data, '--colour'], /Unknown option '--colour'/],
		['a plan that is not there', () => ['--plan', join(folder, 'no.json'), data], /no such file/],
		['data that are not there', () => ['--plan', good, join(folder, 'no.csv')], /no such file/],
		['a folder', () => ['--plan', folder, data], /it is a folder/],
		['a plan that is no JSON', () => ['--plan', data, data], /is not JSON/],
		[
			'a plan with a word that is not known',
			() => ['--plan', keep('a.json', { ...plan, method: 'gls' }), data],
			/^In the plan, method is “gls”; it must be “reml” or “ml”\.$/m
		],
		[
			'a plan for another file',
			() => ['--plan', keep('b.json', { ...plan, outcome: 'weight' }), data],
			/needs a column “weight”/
		],
		[
			'a contrast of no coefficient',
			() => [
				'--plan',
				keep('c.json', { ...plan, contrasts: [{ name: 'x', weights: { arm: 1 } }] }),
				data
			],
			/gives a weight to “arm”/
		],
		[
			'a ragged line',
			() => ['--plan', good, keep('ragged.csv', 'id,t,arm,y\n1,0,0\n')],
			/^Line 2 has 3 cells/
		],
		['no line', () => ['--plan', good, keep('none.csv', 'id,t,arm,y\n')], /There are no rows/],
		[
			'a model the data cannot carry',
			() => ['--plan', good, keep('few.csv', `id,t,arm,y\n${lines.slice(0, 3).join('\n')}\n`)],
			/only one level of the group/
		]
	])(
		'refuses %s in one line, with status 1 and nothing on standard output',
		(_, args, sentence) => {
			const { status, output, complaint } = fitCommand(args());
			expect([status, output]).toEqual([1, '']);
			expect(complaint).toMatch(sentence);
			expect(complaint.trimEnd().split('\n')).toHaveLength(1);
		}
	);
});

test('the columns of a plan are numbers or labels by what they are for', () => {
	const read = readPlan({
		...plan,
		visit: 't',
		mean: {
			covariates: [
				{ name: 'bmi', kind: 'numeric' },
				{ name: 'site', kind: 'categorical' }
			]
		}
	});
	expect(Object.fromEntries(columnsOfPlan(read))).toEqual({
		id: 'label',
		t: 'number',
		arm: 'label',
		site: 'label',
		y: 'number',
		bmi: 'number'
	});
});

test('numbers keep six digits, and columns line up', () => {
	expect(
		[0, 1234567.8, 12345678, 0.00001234567, -3.14159265, null].map((value) => digits(value))
	).toEqual(['0', '1234570', '1.235e+7', '1.235e-5', '-3.14159', '–']);
	expect(
		alignedRows([
			['a', 'b'],
			['long', '×10']
		])
	).toBe('a       b\nlong  ×10');
});
