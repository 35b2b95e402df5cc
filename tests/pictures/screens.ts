import { test } from '../support/browser';
import { publicScreens, ready, screensByRole, signedIn } from '../support/screens';
import { takePictures } from './support/take';

test.describe.configure({ mode: 'parallel' });

for (const role of [
	'administrator',
	'data manager',
	'study coordinator',
	'research nurse',
	'site investigator',
	'site pharmacist',
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
