// Types, format and lint: each counts as one test.
import { existsSync, mkdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { execute } from './commands.mjs';
import { root } from './places.mjs';
import { describe, plain, record } from './results.mjs';

/** @param {string} path */
const tool = (path) => join(root, 'node_modules', path);

/**
 * @param {string} results
 * @param {string} phase
 * @param {string} title
 * @param {string[]} args for node
 * @param {NodeJS.ProcessEnv} env
 */
async function check(results, phase, title, args, env) {
	const before = performance.now();
	const { status, output } = await execute(process.execPath, args, { cwd: root, env });
	/** @type {import('./results.mjs').Result} */
	const result = {
		phase,
		file: '',
		title,
		status: status === 0 ? 'passed' : 'failed',
		ms: Math.round(performance.now() - before),
		...(status === 0 ? {} : { error: plain(output).trim().split('\n').slice(-60).join('\n') })
	};
	record(results, result);
	if (status !== 0)
		process.stdout.write(
			describe({ ...result, error: result.error?.split('\n').slice(-25).join('\n') }) + '\n'
		);
}

/** Kit writes its types into the tests' own folder; this derives a tsconfig from the project's that reads them there. @param {string} kitDir */
function testTsconfig(kitDir) {
	const project = JSON.parse(readFileSync(join(root, 'tsconfig.json'), 'utf8'));
	const path = join(root, kitDir, 'tsconfig.check.json');
	writeFileSync(
		path,
		JSON.stringify({
			extends: './tsconfig.json',
			compilerOptions: project.compilerOptions,
			include: project.include.map((/** @type {string} */ pattern) =>
				pattern.startsWith('.svelte-kit/') ? pattern.replace('.svelte-kit/', './') : `../${pattern}`
			)
		})
	);
	return path;
}

/** @param {string} kitDir @param {NodeJS.ProcessEnv} env */
export async function syncKit(kitDir, env) {
	mkdirSync(join(root, kitDir), { recursive: true });
	const sync = (/** @type {NodeJS.ProcessEnv} */ more) =>
		execute(process.execPath, [tool('@sveltejs/kit/svelte-kit.js'), 'sync'], {
			cwd: root,
			env: { ...env, ...more }
		});
	await sync({ HEDDLE_KIT_DIR: kitDir });
	// The linter and the bundler read the project's own tsconfig, which needs this once on a fresh clone.
	if (!existsSync(join(root, '.svelte-kit/tsconfig.json')))
		await sync({ HEDDLE_KIT_DIR: '.svelte-kit' });
}

/** @param {string} results @param {string} kitDir @param {NodeJS.ProcessEnv} env */
export function checkTypes(results, kitDir, env) {
	const args = [
		tool('svelte-check/bin/svelte-check'),
		'--tsconfig',
		testTsconfig(kitDir),
		'--output',
		'human',
		'--fail-on-warnings'
	];
	return check(results, 'types', 'The types agree', args, env);
}

/** @param {string} results @param {NodeJS.ProcessEnv} env */
export async function checkStyle(results, env) {
	await check(
		results,
		'lint',
		'Every file is formatted',
		[tool('prettier/bin/prettier.cjs'), '--check', '.', '--log-level', 'warn'],
		env
	);
	await check(
		results,
		'lint',
		'The linter has no complaint',
		[tool('eslint/bin/eslint.js'), '.'],
		env
	);
}
