import { spawnSync } from 'node:child_process';
import { mkdtempSync, readFileSync, writeFileSync } from 'node:fs';
import { tmpdir } from 'node:os';
import { join } from 'node:path';
import { describe, expect, test } from 'vitest';
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
