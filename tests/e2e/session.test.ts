import AxeBuilder from '@axe-core/playwright';
import { expect, test } from '../support/browser';
import { accounts, ready, signedIn } from '../support/screens';

const by = async (heddle: import('../support/server').RunningServer, role: string) => {
	const found = (await accounts(heddle)).find((each) => each.role === role);
	if (!found) throw new Error(`The demo has no ${role}`);
	return found;
};

test('a screen that nobody uses is covered after a quarter of an hour, and what was typed is still there', async ({
	browser,
	heddle
}) => {
	const coordinator = await by(heddle, 'study coordinator');
	const context = await signedIn(browser, heddle, coordinator);
	const page = await context.newPage();
	await page.clock.install();
	await page.goto('/account');
	await ready(page);
	const field = page.locator('main input:not([type=hidden])').first();
	await field.fill('half a sentence');
	await page.clock.runFor('15:30');
	const covered = page.getByRole('dialog');
	await expect(covered).toBeVisible();
	expect((await new AxeBuilder({ page }).analyze()).violations).toEqual([]);
	// The server holds it too: another tab of the same session gets nothing.
	await expect.poll(async () => (await context.request.get('/api/studies')).status()).not.toBe(200);
	expect((await context.request.get('/api/session')).status()).toBe(401);

	await covered.getByLabel('Password').fill('not the password at all');
	await covered.getByRole('button', { name: 'Unlock' }).click();
	await expect(covered.getByText('That is not your password.')).toBeVisible();
	await covered.getByLabel('Password').fill(coordinator.password);
	await covered.getByRole('button', { name: 'Unlock' }).click();
	await expect(covered).toBeHidden();
	await expect(field).toHaveValue('half a sentence');
	expect((await context.request.get('/api/session')).status()).toBe(200);
	await context.close();
});

test('the organisation’s identity provider signs in whoever has an account, and nobody else', async ({
	browser,
	heddle
}) => {
	const nurse = await by(heddle, 'research nurse');
	const context = await browser.newContext({ baseURL: heddle.origin });
	const page = await context.newPage();
	await page.goto('/sign-in');
	await ready(page);
	await page.getByRole('button', { name: 'Sign in with your organisation account' }).click();
	// Both pages ask for an e-mail address: the other one must be there first.
	await page.waitForURL((url) => url.origin !== heddle.origin);
	await page.getByLabel('E-mail address').fill(nurse.email);
	await page.getByRole('button', { name: 'Sign in' }).click();
	await page.waitForURL(
		(url) => url.origin === heddle.origin && !url.pathname.startsWith('/sign-in')
	);
	expect((await context.request.get('/api/session')).status()).toBe(200);
	await context.clearCookies();

	await page.goto('/sign-in');
	await ready(page);
	await page.getByRole('button', { name: 'Sign in with your organisation account' }).click();
	// Both pages ask for an e-mail address: the other one must be there first.
	await page.waitForURL((url) => url.origin !== heddle.origin);
	await page.getByLabel('E-mail address').fill('stranger@elsewhere.example');
	await page.getByRole('button', { name: 'Sign in' }).click();
	await page.waitForURL(
		(url) => url.origin === heddle.origin && url.pathname.startsWith('/sign-in')
	);
	await expect(page.getByText('That account has no access here.')).toBeVisible();
	await context.close();
});

test('signing in, working and signing out work without JavaScript', async ({ browser, heddle }) => {
	const statistician = await by(heddle, 'trial statistician');
	const context = await browser.newContext({ baseURL: heddle.origin, javaScriptEnabled: false });
	const page = await context.newPage();
	await page.goto('/sign-in?to=%2Faccount');
	await page.getByLabel('E-mail address').fill(statistician.email);
	await page.getByLabel('Password', { exact: true }).fill(statistician.password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await expect(page).toHaveURL(/\/account$/);
	await page.locator('#main').getByRole('button', { name: 'Sign out', exact: true }).click();
	await page.goto('/account');
	await expect(page).toHaveURL(/\/sign-in/);
	await context.close();
});
