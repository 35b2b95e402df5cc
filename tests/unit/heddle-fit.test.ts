import { spawnSync } from 'node:child_process';
import { mkdtempSync, readFileSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, test } from 'vitest';
import { buildModelDesign, contrasts, readPlan } from '../../src/lib/stats';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { root } from '../../scripts/lib/places.mjs';

const folder = mkdtempSync(join(tmpdir(), 'heddle-cli-'));
const data = join(root, 'src/lib/stats/reference/orthodont.csv');
const write = (name: string, content: string) => {
	writeFileSync(join(folder, name), content);
	return join(folder, name);
};
const plan = write(
	'plan.json',
	JSON.stringify({ outcome: 'y', subject: 'subject', time: 'time', group: 'arm' })
);

/** The program as a person runs it, from a folder of their own, with no database named. */
function heddle(...args: string[]) {
	const { status, stdout, stderr } = spawnSync(
		process.execPath,
		[join(root, 'bin/heddle.mjs'), ...args],
		{
			cwd: folder,
			encoding: 'utf8',
			env: { PATH: process.env.PATH, HOME: folder, HEDDLE_BUILD_DIR: testBuild.buildDir }
		}
	);
	return { status, stdout, stderr };
}

test('the plan that the README shows can be read, and its contrast names coefficients of its model', () => {
	const readme = readFileSync(join(root, 'README.md'), 'utf8');
	const plan = readPlan(JSON.parse(/```json\n([\s\S]+?)```/.exec(readme)![1]!));
	const n = 40;
	const by = <T>(value: (i: number) => T) => Array.from({ length: n }, (_, i) => value(i));
	const built = buildModelDesign(
		{
			subject: by((i) => Math.floor(i / 4)),
			years: by((i) => i % 4),
			visit: by((i) => i % 4),
			arm: by((i) => 'AB'[Math.floor(i / 4) % 2]!),
			age: by((i) => 40 + ((Math.floor(i / 4) * 7) % 11)),
			site: by((i) => (Math.floor(i / 4) % 3 === 0 ? 'Northmoor' : 'Tarnbeck')),
			egfr: by((i) => 60 - (i % 4) + ((i * 7) % 5))
		},
		plan
	);
	const { name, weights } = plan.contrasts![0]!;
	expect(contrasts.combination(built, weights, name).weights.filter(Boolean)).toEqual([1, 2]);
});

describe('npx heddle fit', () => {
	test('prints the result as one JSON document and nothing else', () => {
		const { status, stdout, stderr } = heddle('fit', '--plan', plan, data);
		expect([status, stderr]).toEqual([0, '']);
		const result = JSON.parse(stdout) as { coefficients: { name: string; estimate: number }[] };
		const expected = JSON.parse(
			readFileSync(join(root, 'src/lib/stats/reference/fits-orthodont.json'), 'utf8')
		) as { fits: Record<string, { beta: Record<string, number> }> };
		const slope = result.coefficients.find((c) => c.name === 'time × group 1')!.estimate;
		expect(slope).toBeCloseTo(expected.fits['M1.REML']!.beta['time:arm']!, 6);
	});

	test('prints a table for people', () => {
		const { status, stdout } = heddle('fit', '--plan', plan, data, '--table');
		expect(status).toBe(0);
		expect(stdout).toMatch(/^time × group 1 +-0\.3048/m);
	});

	test('finds files from where it is called', () => {
		write('near.csv', readFileSync(data, 'utf8'));
		expect(heddle('fit', '--plan', 'plan.json', 'near.csv').status).toBe(0);
	});

	test.each([
		[
			'a bad plan',
			['--plan', write('bad.json', '{"outcome": "y"}'), data],
			/^In the plan, subject/
		],
		['bad data', ['--plan', plan, write('bad.csv', 'subject,time,arm,y\na,0\n')], /^Line 2 has 2/],
		['no data', ['--plan', plan], /^One file of data must be named/]
	])('refuses %s with a sentence on standard error and status 1', (_, args, sentence) => {
		const { status, stdout, stderr } = heddle('fit', ...args);
		expect([status, stdout]).toEqual([1, '']);
		expect(stderr).toMatch(sentence);
		expect(stderr.trimEnd().split('\n')).toHaveLength(1);
	});
});
