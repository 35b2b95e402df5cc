// `npm run trace`: each requirement of tests/requirements.md with the tests that carry its id, and their last result.
import { existsSync, readFileSync } from 'node:fs';
import { join } from 'node:path';
import { readJson, root } from './lib/places.mjs';
import { Trouble, print, run } from './lib/say.mjs';
import { idsIn, requirementsIn } from './lib/requirements.mjs';

await run(async () => {
	const requirements = requirementsIn(readFileSync(join(root, 'tests/requirements.md'), 'utf8'));
	const runs = ['results.json', 'results-proof.json']
		.map((name) => join(root, 'test-results', name))
		.filter((path) => existsSync(path));
	if (runs.length === 0) throw new Trouble('There are no results yet: run `npm test` first.');
	/** @type {import('./lib/results.mjs').Result[]} */
	const results = runs.flatMap((path) => readJson(path)?.results ?? []);
	const carried = results.map((result) => ({ ...result, ids: idsIn(result.title) }));

	const unknown = [...new Set(carried.flatMap(({ ids }) => ids))].filter(
		(id) => !requirements.some((one) => one.id === id)
	);
	const bare = [];
	for (const { id, requirement } of requirements) {
		const tests = carried.filter(({ ids }) => ids.includes(id));
		if (tests.length === 0) {
			bare.push({ id, requirement });
			continue;
		}
		print(`${id}  ${requirement}`);
		for (const { status, phase, file, title } of tests)
			print(
				`    ${status === 'passed' ? '✓' : '✗'} ${status.padEnd(7)} ${phase}  ${file}  ${title}`
			);
	}
	print(`\nWith no test yet (${bare.length} of ${requirements.length}):`);
	for (const { id, requirement } of bare) print(`${id}  ${requirement}`);
	if (unknown.length > 0) print(`\nIn test titles but in no list: ${unknown.join(', ')}`);
	return unknown.length > 0 ? 1 : 0;
});
