import { expect, test } from '../support/browser';
import { accounts, ready, signedIn } from '../support/screens';

test('a form that does not reach the server says so, keeps what was typed, and works once the network is back', async ({
	browser,
	heddle
}) => {
	const administrator = (await accounts(heddle)).find((each) => each.role === 'administrator');
	if (!administrator) throw new Error('The demo has no administrator');
	const context = await signedIn(browser, heddle, administrator);
	const page = await context.newPage();
	await page.goto('/people');
	await ready(page);
	await page.getByLabel('Name', { exact: true }).fill('Runa Fiske');
	await page.getByLabel('E-mail address').fill('runa.fiske@post.example');
	await context.setOffline(true);
	const send = page.getByRole('button', { name: 'Send the invitation' });
	await send.click();
	await expect(page.getByText('The server could not be reached')).toBeVisible();
	await expect(page.getByLabel('Name', { exact: true })).toHaveValue('Runa Fiske');
	await context.setOffline(false);
	await expect(send).toBeEnabled();
	await send.click();
	const mail = await heddle.mailTo('runa.fiske@post.example');
	expect(mail.text).toContain('/invitation/');
	await context.close();
});
