import { test as base } from '@playwright/test';
import { cluster } from './database';
import { startServer, type RunningServer } from './server';

/**
 * Playwright's `test` with a whole running Heddle per worker: `heddle` (demo data when there are any,
 * both workers, mail catcher, identity provider). `page.goto('/…')` goes to it.
 */
export const test = base.extend<object, { heddle: RunningServer }>({
	heddle: [
		// Playwright wants the first argument destructured, also when nothing is taken from it.
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer({
				template: cluster(true).demo ? 'demo' : 'migrated',
				worker: true,
				lookWorker: true,
				oidc: true
			});
			await use(server);
			await server.stop();
		},
		{ scope: 'worker', timeout: 180_000 }
	],
	baseURL: async ({ heddle }, use) => use(heddle.origin)
});

export { expect } from '@playwright/test';
