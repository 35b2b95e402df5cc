import { defineConfig } from '@playwright/test';

const reporter = process.env.HEDDLE_RESULTS
	? ([['./scripts/lib/playwright-reporter.mjs']] as [[string]])
	: 'list';

export default defineConfig({
	outputDir: 'test-results/browser',
	timeout: 60_000,
	expect: { timeout: 10_000 },
	workers: 2,
	fullyParallel: false,
	forbidOnly: Boolean(process.env.HEDDLE_RESULTS),
	reporter,
	use: {
		viewport: { width: 1280, height: 800 },
		locale: 'en-GB',
		timezoneId: 'Europe/Berlin',
		trace: 'retain-on-failure',
		screenshot: 'only-on-failure',
		launchOptions: {
			executablePath: process.env.CHROMIUM ?? '/usr/bin/chromium',
			args: ['--no-sandbox', '--disable-dev-shm-usage']
		}
	},
	projects: [
		{ name: 'e2e', testDir: 'tests/e2e', testMatch: '**/*.test.ts' },
		{
			name: 'pictures',
			testDir: 'tests/pictures',
			testMatch: /tests\/pictures\/[^/]+\.ts$/,
			timeout: 600_000
		}
	]
});
