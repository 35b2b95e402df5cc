// Dependencies and builds, done again only when what they are made from has changed.
import { createHash } from 'node:crypto';
import { existsSync, readdirSync, readFileSync, rmSync, statSync, writeFileSync } from 'node:fs';
import { join, relative } from 'node:path';
import { execute } from './commands.mjs';
import { readJson, root } from './places.mjs';
import { Trouble, explain } from './say.mjs';

/** All that a build is made from. */
const sources = [
	'src',
	'static',
	'migrations',
	'templates',
	'package.json',
	'package-lock.json',
	'svelte.config.js',
	'vite.config.ts',
	'tailwind.config.js',
	'tsconfig.json'
];

/** @param {string} path @returns {string[]} */
function filesUnder(path) {
	if (!existsSync(path)) return [];
	if (!statSync(path).isDirectory()) return [path];
	return readdirSync(path)
		.sort()
		.flatMap((name) => filesUnder(join(path, name)));
}

/**
 * A fingerprint of files by name and content.
 * @param {string} base
 * @param {string[]} paths
 * @param {(path: string) => boolean} [counts]
 */
export function stampOf(base, paths, counts = () => true) {
	const hash = createHash('sha256');
	for (const file of paths.flatMap((path) => filesUnder(join(base, path)))) {
		const name = relative(base, file);
		if (!counts(name)) continue;
		const content = readFileSync(file);
		hash.update(`${name}\0${content.length}\0`).update(content);
	}
	return hash.digest('hex');
}

/** Tests beside the code are no part of a build. @param {string} name */
const isSource = (name) => !/\.test\.(ts|js)$/.test(name) && !/(^|\/)reference\//.test(name);

/** The installed packages are those of the lock file. @param {string} base */
export function dependenciesAreThere(base) {
	const wanted = readJson(join(base, 'package-lock.json'))?.packages;
	// npm writes this file last, so a stopped installation has none.
	const there = readJson(join(base, 'node_modules', '.package-lock.json'))?.packages;
	if (!wanted || !there) return false;
	return Object.entries(wanted).every(
		([path, wants]) =>
			path === '' || wants.optional || wants.peer || there[path]?.version === wants.version
	);
}

/** @param {(line: string) => void} say */
export async function installDependencies(say) {
	if (dependenciesAreThere(root)) return;
	say('Installing the locked dependencies (about a minute and a half)');
	const { status, output } = await execute(
		'npm',
		['ci', '--include=dev', '--no-audit', '--no-fund'],
		{
			cwd: root,
			env: { ...process.env, PLAYWRIGHT_SKIP_BROWSER_DOWNLOAD: '1', NODE_ENV: '' }
		}
	);
	if (status !== 0)
		throw new Trouble(
			explain({ message: output }) ??
				`The dependencies could not be installed:\n${output.trim().split('\n').slice(-12).join('\n')}`
		);
}

/**
 * @param {{ buildDir: string, kitDir: string, say: (line: string) => void, web?: boolean }} options
 *   web: false makes the command-line programs only
 */
export async function build({ buildDir, kitDir, say, web = true }) {
	const env = {
		...process.env,
		HEDDLE_BUILD_DIR: buildDir,
		HEDDLE_KIT_DIR: kitDir,
		NODE_ENV: 'production'
	};
	const stamp = stampOf(root, sources, isSource);
	const out = join(root, buildDir);
	const part = async (/** @type {string} */ name, /** @type {string[]} */ args) => {
		const mark = join(out, `.stamp-${name}`);
		if (existsSync(mark) && readFileSync(mark, 'utf8') === stamp) return false;
		rmSync(mark, { force: true });
		say(name === 'web' ? 'Building (about a minute)' : 'Building the command-line programs');
		const { status, output } = await execute(
			process.execPath,
			[join(root, 'node_modules/vite/bin/vite.js'), 'build', ...args],
			{ cwd: root, env }
		);
		if (status !== 0)
			throw new Trouble(
				explain({ message: output }) ??
					`The build failed:\n${output.trim().split('\n').slice(-30).join('\n')}`
			);
		writeFileSync(mark, stamp);
		return true;
	};
	// The compiler's settings extend a file that the framework writes, also when the build itself lies elsewhere.
	if (!existsSync(join(root, '.svelte-kit/tsconfig.json')))
		await execute(
			process.execPath,
			[join(root, 'node_modules/@sveltejs/kit/svelte-kit.js'), 'sync'],
			{
				cwd: root,
				env: { ...env, HEDDLE_KIT_DIR: '.svelte-kit' }
			}
		);
	// The adapter empties the folder, so the command-line programs come second.
	const again = web && (await part('web', []));
	if (again) rmSync(join(out, '.stamp-cli'), { force: true });
	await part('cli', ['--mode', 'cli']);
}

/** A program of the command-line build. @param {string} buildDir @param {string} name */
export const program = (buildDir, name) => join(root, buildDir, 'cli', `${name}.js`);
