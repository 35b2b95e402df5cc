// Running the test programs; shared by test, proof and pictures.
import { existsSync, mkdirSync, readdirSync, rmSync, writeFileSync } from 'node:fs';
import { basename, join } from 'node:path';
import { build, installDependencies } from './build.mjs';
import { installCheckers } from './checkers.mjs';
import { endRunning, execute } from './commands.mjs';
import { takeLock } from './lock.mjs';
import { folder, readJson, root, writeJson } from './places.mjs';
import { print, say, Trouble } from './say.mjs';
import { describe, readResults, record, tally } from './results.mjs';
import { removeTestCluster, testBuild, testCluster, testState } from './test-cluster.mjs';

/** @param {string} place @param {RegExp} name @returns {string[]} */
export function testFiles(place, name) {
	const path = join(root, place);
	if (!existsSync(path)) return [];
	return readdirSync(path, { recursive: true })
		.map(String)
		.filter((file) => name.test(file) && !file.includes('node_modules'))
		.map((file) => join(place, file));
}

/**
 * @typedef {object} Run
 * @property {string} results     the file results are written to
 * @property {NodeJS.ProcessEnv} env
 * @property {string | null} filter
 * @property {(phase: string, work: () => Promise<void>) => Promise<void>} phase
 */

/** Whether a filter names files or tests. @param {string} filter @param {string[]} files */
export const namesFiles = (filter, files) =>
	files.some((file) => file.toLowerCase().includes(filter.toLowerCase()));

/** @param {string} text */
const literal = (text) => text.replace(/[.*+?^${}()|[\]\\/]/g, '\\$&');

/** @param {Run} run @param {string[]} projects @param {string[]} files */
export async function runVitest(run, projects, files) {
	const filter = run.filter;
	const byFile = filter !== null && namesFiles(filter, files);
	const args = [
		join(root, 'node_modules/vitest/vitest.mjs'),
		'run',
		'--passWithNoTests',
		'--maxWorkers=2',
		`--reporter=${join(root, 'scripts/lib/vitest-reporter.mjs')}`,
		...projects.flatMap((project) => ['--project', project]),
		...(filter === null ? [] : byFile ? [filter] : ['-t', literal(filter)])
	];
	await follow(run, args, projects.join('+'), {
		HEDDLE_PICKED: filter !== null && !byFile ? '1' : '0'
	});
}

/** @param {Run} run @param {string} project @param {string[]} files */
export async function runPlaywright(run, project, files) {
	const filter = run.filter;
	const args = [
		join(root, 'node_modules/@playwright/test/cli.js'),
		'test',
		'--project',
		project,
		'--pass-with-no-tests',
		...(filter === null
			? []
			: namesFiles(filter, files)
				? [literal(filter)]
				: ['-g', literal(filter)])
	];
	await follow(run, args, project, {});
}

/** Kit's hint about the tsconfig, which is derived for the tests' own folder elsewhere. @param {string} line */
const kitHint = (line) =>
	/^Your tsconfig\.json should extend|^\{$|^\}$|^ {2}"extends": "\.\/\.svelte-kit/.test(line);

/** Runs it with its output shown; a bad end without a failed test counts as one failure. @param {Run} run @param {string[]} args @param {string} name @param {NodeJS.ProcessEnv} more */
async function follow(run, args, name, more) {
	const before = readResults(run.results).length;
	const { status, output } = await execute(process.execPath, args, {
		cwd: root,
		env: { ...run.env, ...more },
		onLine: (line) => line.trim() && !kitHint(line) && print(line)
	});
	const own = readResults(run.results).slice(before);
	const failed = own.some((result) => result.status === 'failed');
	if ((status !== 0 && !failed) || (own.length === 0 && run.filter === null)) {
		/** @type {import('./results.mjs').Result} */
		const result = {
			phase: name,
			file: '',
			title: 'the test program itself',
			status: 'failed',
			ms: 0,
			error: `It ended with status ${status} and ${own.length} results.\n${output.trim().split('\n').slice(-20).join('\n')}`
		};
		record(run.results, result);
		print(describe(result));
	}
}

/**
 * Sets everything up, runs `work`, prints the closing line, cleans up; gives back the exit status.
 * @param {{ name: string, title: string, throwAway?: boolean, withDemo?: boolean, needs?: { cluster: boolean, web: boolean, checkers: boolean },
 *   filter?: string | null, keep?: boolean, beside?: (run: Run) => Promise<void> }} options
 *   beside: work that needs neither cluster nor build and goes on while they are made
 * @param {(run: Run) => Promise<void>} work
 */
export async function testRun(options, work) {
	const { name, title, throwAway = true, withDemo = false, filter = null, keep = false } = options;
	const needs = options.needs ?? { cluster: true, web: true, checkers: true };
	const state = folder(testState(name), 0o711);
	const lock = takeLock(join(state, 'run.lock'), basename(process.argv[1] ?? 'test.mjs'));
	if ('holder' in lock)
		throw new Trouble(`${title} is already running here (process ${lock.holder.pid}).`);
	const clean = async () => {
		endRunning();
		lock.release();
		if (!keep && needs.cluster) await removeTestCluster(name);
	};
	for (const signal of /** @type {const} */ (['SIGINT', 'SIGTERM', 'SIGHUP']))
		process.once(signal, async () => {
			print();
			say('Stopping');
			await clean();
			process.exit(130);
		});
	const resultsFolder = folder(join(root, 'test-results'), 0o755);
	const results = join(resultsFolder, `${name}.jsonl`);
	try {
		await installDependencies(say);
		if (needs.checkers) await installCheckers(say);
		rmSync(results, { force: true });
		writeFileSync(results, '');
		/** @type {Run} */
		const run = {
			results,
			filter,
			env: {
				...withoutOwn(process.env),
				HEDDLE_BUILD_DIR: testBuild.buildDir,
				HEDDLE_KIT_DIR: testBuild.kitDir,
				HEDDLE_RESULTS: results,
				PLAYWRIGHT_SKIP_BROWSER_DOWNLOAD: '1',
				FORCE_COLOR: '0',
				NO_COLOR: '1'
			},
			async phase(phase, run) {
				say(phase);
				const before = performance.now();
				const count = readResults(results).length;
				await run();
				const now = readResults(results).slice(count);
				say(
					`${phase}: ${tally(now, filter !== null).line} (${((performance.now() - before) / 1000).toFixed(0)} s)`
				);
			}
		};
		const beside = options.beside?.(run);
		beside?.catch(() => {});
		if (needs.web) await build({ ...testBuild, say });
		if (needs.cluster)
			run.env.HEDDLE_TEST_CLUSTER = JSON.stringify(
				await testCluster({ name, throwAway, withDemo, say })
			);
		await beside;
		await work(run);
		const all = readResults(results);
		mkdirSync(resultsFolder, { recursive: true }); // the browser tests empty their part of it
		if (filter === null)
			keepResults(
				join(resultsFolder, name === 'test' ? 'results.json' : `results-${name}.json`),
				all
			);
		const { failed, passed, line } = tally(all, filter !== null);
		const wrong = all.filter(
			({ status }) => status === 'failed' || (status === 'skipped' && filter === null)
		);
		if (wrong.length > 0)
			print(
				`\nFailed:\n${wrong.map(({ phase, file, title: text }) => `  ✗ ${phase}  ${file}  ${text}`).join('\n')}`
			);
		print(`\n${line}`);
		return failed > 0 || passed === 0 ? 1 : 0;
	} finally {
		await clean();
	}
}

/** Phases that did not run this time keep their last results. @param {string} path @param {import('./results.mjs').Result[]} all */
function keepResults(path, all) {
	const ran = new Set(all.map(({ phase }) => phase));
	/** @type {import('./results.mjs').Result[]} */
	const before = readJson(path)?.results ?? [];
	const results = [...before.filter(({ phase }) => !ran.has(phase)), ...all];
	writeJson(path, { finished: new Date().toISOString(), results }, 0o644);
}

/** The caller's own Heddle settings must not reach the tests. @param {NodeJS.ProcessEnv} env */
function withoutOwn(env) {
	const own =
		/^(DATABASE_|HEDDLE_|CLOSED_|SMTP_|MAIL_|OIDC_|S3_|STORAGE_|AUTH_|ORIGIN$|HOST$|PORT$|IDLE_|TRAINING_|LOG_LEVEL$|NODE_ENV$)/;
	return Object.fromEntries(Object.entries(env).filter(([name]) => !own.test(name)));
}
