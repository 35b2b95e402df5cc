import { join } from 'node:path';
import type { Page } from '@playwright/test';
import { root } from '../../scripts/lib/places.mjs';
import { test } from '../support/browser';
import { publicScreens, ready, screensByRole, signedIn } from '../support/screens';

test.describe.configure({ mode: 'parallel' });

/** One page in four looks: wide and narrow, light and dark. */
async function takePictures(page: Page, folder: string, name: string): Promise<void> {
	for (const [width, height] of [
		[1280, 800],
		[820, 1180]
	] as const) {
		await page.setViewportSize({ width, height });
		for (const colorScheme of ['light', 'dark'] as const) {
			await page.emulateMedia({ colorScheme, reducedMotion: 'reduce' });
			await page.screenshot({
				path: join(root, 'pictures', folder, `${name} ${width} ${colorScheme}.png`),
				fullPage: true
			});
		}
	}
}

for (const role of [
	'administrator',
	'data manager',
	'study coordinator',
	'research nurse',
	'site investigator',
	'monitor',
	'auditor',
	'trial statistician',
	'independent statistician',
	'monitoring board member'
])
	test(`pictures for the ${role}`, async ({ browser, heddle }) => {
		test.setTimeout(1_800_000);
		const mine = (await screensByRole(heddle)).find((each) => each.account.role === role);
		if (!mine) throw new Error(`The demo has no ${role}`);
		const context = await signedIn(browser, heddle, mine.account);
		const page = await context.newPage();
		for (const screen of mine.screens) {
			await page.goto(screen.path);
			await ready(page);
			await takePictures(page, role, screen.name);
		}
		await context.close();
	});

test('pictures before sign-in', async ({ browser, heddle }) => {
	const context = await browser.newContext({ baseURL: heddle.origin, locale: 'en-GB' });
	const page = await context.newPage();
	for (const screen of publicScreens) {
		await page.goto(screen.path);
		await ready(page);
		await takePictures(page, 'before sign-in', screen.name);
	}
	await context.close();
});
