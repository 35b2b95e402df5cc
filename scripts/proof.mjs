// `npm run proof`: what is too heavy for every day (races, kills, volumes, twin databases, full simulations), on a
// cluster with PostgreSQL's default durability. At most an hour.
import { print, run } from './lib/say.mjs';
import { runVitest, testFiles, testRun } from './lib/test-run.mjs';

await run(async () => {
	const files = testFiles('tests/proof', /\.test\.ts$/);
	if (files.length === 0) {
		print('There is nothing to prove yet.\n\n0 passed, 0 failed');
		return 1;
	}
	const at = process.argv.indexOf('--filter');
	return testRun(
		{
			name: 'proof',
			title: 'A proof run',
			throwAway: false,
			filter: at > 0 ? (process.argv[at + 1] ?? null) : null
		},
		(tests) => {
			tests.env.HEDDLE_FIGURES = '1';
			return tests.phase('proof', () => runVitest(tests, ['proof'], files));
		}
	);
});
