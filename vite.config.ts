import { fileURLToPath } from 'node:url';
import { readdirSync } from 'node:fs';
import { basename } from 'node:path';
import { sveltekit } from '@sveltejs/kit/vite';
import { svelte, vitePreprocess } from '@sveltejs/vite-plugin-svelte';
import { svelteTesting } from '@testing-library/svelte/vite';
import tailwindcss from '@tailwindcss/vite';
import { defineConfig } from 'vitest/config';

const at = (path: string) => fileURLToPath(new URL(path, import.meta.url));

// The barrel of adapters would make every build read a dozen validators that are not used here.
const superformsAdapters = {
	'sveltekit-superforms/adapters': at('./src/lib/forms/superforms-adapters.js')
};

/** The command-line programs: one entry for each file in src/cli, every package left as an import. */
const commandLine = {
	plugins: [svelte({ configFile: false as const, preprocess: vitePreprocess() })],
	resolve: { alias: { $lib: at('./src/lib'), ...superformsAdapters } },
	build: {
		ssr: true,
		target: 'node20',
		outDir: `${process.env.HEDDLE_BUILD_DIR ?? 'build'}/cli`,
		emptyOutDir: true,
		rollupOptions: {
			input: Object.fromEntries(
				readdirSync(at('./src/cli'))
					.filter((file) => file.endsWith('.ts'))
					.map((file) => [basename(file, '.ts'), at(`./src/cli/${file}`)])
			),
			output: { entryFileNames: '[name].js' }
		}
	}
};

const database = {
	environment: 'node' as const,
	testTimeout: 60_000,
	hookTimeout: 120_000,
	pool: 'forks' as const
};

export default defineConfig(({ mode }) =>
	mode === 'cli'
		? commandLine
		: {
				plugins: [tailwindcss(), sveltekit()],
				resolve: { alias: superformsAdapters },
				server: { fs: { allow: [at('./tests'), at('./templates')] } },
				test: {
					projects: [
						{
							extends: true,
							test: {
								name: 'unit',
								environment: 'node',
								include: ['src/**/*.test.ts', 'scripts/**/*.test.ts', 'tests/unit/**/*.test.ts'],
								exclude: ['src/**/*.svelte.test.ts'],
								env: { TZ: 'America/St_Johns' },
								testTimeout: 60_000
							}
						},
						{
							extends: true,
							plugins: [svelteTesting()],
							test: {
								name: 'component',
								environment: 'jsdom',
								include: ['src/**/*.svelte.test.ts']
							}
						},
						{
							extends: true,
							test: { name: 'db', include: ['tests/db/**/*.test.ts'], ...database }
						},
						{
							extends: true,
							test: { name: 'http', include: ['tests/http/**/*.test.ts'], ...database }
						},
						{
							extends: true,
							test: {
								name: 'proof',
								include: ['tests/proof/**/*.test.ts'],
								...database,
								testTimeout: 1_800_000
							}
						}
					]
				}
			}
);
