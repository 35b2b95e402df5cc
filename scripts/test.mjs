// `npm test`: sets itself up beside a running `npm start`, runs everything, ends with one line.
import { print, run } from './lib/say.mjs';
import { checkStyle, checkTypes, syncKit } from './lib/static-checks.mjs';
import { runPlaywright, runVitest, testFiles, testRun } from './lib/test-run.mjs';
import { Trouble } from './lib/say.mjs';

const usage = `npm test                        everything
npm test -- --only db           some phases: types, lint, unit, component, db, http, e2e (comma between)
npm test -- --filter words      only test files or tests whose name holds the words
npm test -- --keep              leaves the test database running for the next run`;

/** Not the build's own folder: writing types there while the build reads it gave pages that never woke up. */
const checkKit = '.svelte-kit-check';

const phases = ['types', 'lint', 'unit', 'component', 'db', 'http', 'e2e'];
const files = {
	unit: [
		...testFiles('src', /(?<!\.svelte)\.test\.ts$/),
		...testFiles('scripts', /\.test\.ts$/),
		...testFiles('tests/unit', /\.test\.ts$/)
	],
	component: testFiles('src', /\.svelte\.test\.ts$/),
	db: testFiles('tests/db', /\.test\.ts$/),
	http: testFiles('tests/http', /\.test\.ts$/),
	e2e: testFiles('tests/e2e', /\.test\.ts$/)
};

await run(async () => {
	const { only, filter, keep, help } = readArguments(process.argv.slice(2));
	if (help) return print(usage);
	const wants = (/** @type {string} */ phase) =>
		only.includes(phase) && (files[/** @type {keyof typeof files} */ (phase)]?.length ?? 1) > 0;
	const server = wants('http') || wants('e2e');
	return testRun(
		{
			name: 'test',
			title: 'A test run',
			filter,
			keep,
			withDemo: wants('e2e') || wants('http'),
			needs: {
				cluster: server || wants('db') || wants('unit'),
				web: server,
				checkers: server || wants('unit') || wants('db')
			},
			beside: async (tests) => {
				if (filter !== null) return;
				await syncKit(checkKit, tests.env);
				if (wants('types'))
					await tests.phase('types', () => checkTypes(tests.results, checkKit, tests.env));
				if (wants('lint')) await tests.phase('lint', () => checkStyle(tests.results, tests.env));
			}
		},
		async (tests) => {
			for (const group of [
				['unit', 'component'],
				['db', 'http']
			]) {
				const wanted = group.filter(wants);
				if (wanted.length > 0)
					await tests.phase(wanted.join(' and '), () =>
						runVitest(
							tests,
							wanted,
							wanted.flatMap((phase) => files[/** @type {keyof typeof files} */ (phase)])
						)
					);
			}
			if (wants('e2e')) await tests.phase('e2e', () => runPlaywright(tests, 'e2e', files.e2e));
		}
	);
});

/** @param {string[]} args */
function readArguments(args) {
	const read = {
		only: phases,
		filter: /** @type {string | null} */ (null),
		keep: false,
		help: false
	};
	for (let i = 0; i < args.length; i++) {
		const value = () => {
			const next = args[++i];
			if (!next) throw new Trouble(`${args[i - 1]} needs a word after it.\n\n${usage}`);
			return next;
		};
		if (args[i] === '--only') read.only = value().split(',');
		else if (args[i] === '--filter') read.filter = value();
		else if (args[i] === '--keep') read.keep = true;
		else if (args[i] === '--help') read.help = true;
		else throw new Trouble(`${args[i]} is not known here.\n\n${usage}`);
	}
	const odd = read.only.find((phase) => !phases.includes(phase));
	if (odd) throw new Trouble(`There is no phase ${odd}.\n\n${usage}`);
	return read;
}
