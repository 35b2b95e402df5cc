import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test as base, type Page } from '@playwright/test';
import { addBareStudy, type BareStudy } from '../support/bare-scene';
import { addPerson, addRole, asOwner } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';

interface Shared {
	server: RunningServer;
	study: BareStudy;
}

const test = base.extend<object, { shared: Shared }>({
	shared: [
		// Playwright wants the first argument destructured, also when nothing is taken from it.
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer({ worker: true });
			const study = await addBareStudy(server.database, 'AC-1');
			const passwordHash = await hash(password, {
				memoryCost: 19456,
				timeCost: 2,
				parallelism: 1
			});
			for (const [email, name] of [
				['ada@example.org', 'Ada Loom'],
				['ben@example.org', 'Ben Reed']
			] as const) {
				const id = await addPerson(server.database, { email, name, passwordHash });
				await addRole(server.database, id, 'administrator');
			}
			await use({ server, study });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	],
	baseURL: async ({ shared }, use) => use(shared.server.origin)
});
test.describe.configure({ mode: 'serial', timeout: 180_000 });

const ready = (page: Page) => page.locator('html[data-ready="yes"]').waitFor();

async function signIn(page: Page, email: string, secret = password) {
	await page.goto('/sign-in');
	await ready(page);
	await page.getByLabel('E-mail address').fill(email);
	await page.getByLabel('Password', { exact: true }).fill(secret);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.waitForURL((url) => !url.pathname.startsWith('/sign-in'));
	await ready(page);
}

async function clean(page: Page) {
	const { violations } = await new AxeBuilder({ page })
		.withTags(['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa', 'best-practice'])
		.analyze();
	expect(
		violations.map((v) => `${v.id}: ${v.nodes.map((n) => n.target.join(' ')).join(', ')}`)
	).toEqual([]);
}

test('an administrator invites a person, who sets a password by the mailed link and signs in', async ({
	page,
	browser,
	shared
}) => {
	await signIn(page, 'ada@example.org');
	await page.goto('/people');
	await ready(page);
	await clean(page);
	await page.getByLabel('Name', { exact: true }).fill('Cleo Heald');
	await page.getByLabel('E-mail address').fill('cleo@example');
	await page.getByRole('button', { name: 'Send the invitation' }).click();
	await expect(page.getByText('Enter an e-mail address, such as')).toBeVisible();
	await expect(page.getByLabel('Name', { exact: true })).toHaveValue('Cleo Heald');
	await page.getByLabel('E-mail address').fill('cleo@example.org');
	await page.getByRole('button', { name: 'Send the invitation' }).click();
	await expect(page.getByRole('heading', { name: 'Cleo Heald' })).toBeVisible();
	await expect(page.getByText('invited', { exact: true })).toBeVisible();
	await clean(page);

	const mail = await shared.server.mailTo('cleo@example.org');
	const link = /https?:\/\/\S+/.exec(mail.text)?.[0] as string;
	const cleo = await (await browser.newContext()).newPage();
	await cleo.goto(link);
	await ready(cleo);
	await clean(cleo);
	// By keyboard alone.
	await cleo.getByLabel('New password').focus();
	await cleo.keyboard.type(password);
	await cleo.keyboard.press('Tab');
	await cleo.keyboard.type(`${password}!`);
	await cleo.keyboard.press('Enter');
	await expect(cleo.getByText('The two entries are not the same.')).toBeVisible();
	await cleo.getByLabel('New password').fill(password);
	await cleo.getByLabel('The same again').fill(password);
	await cleo.keyboard.press('Enter');
	await expect(cleo.getByText('Your password is set. Sign in with it.')).toBeVisible();
	await signIn(cleo, 'cleo@example.org');
	await expect(cleo.getByText('No study yet')).toBeVisible();
	await cleo.context().close();
});

test('roles: granted with dates, refused as a pair, confirmed by a second administrator, ended at once', async ({
	page,
	browser
}) => {
	await signIn(page, 'ada@example.org');
	await page.goto('/people');
	await ready(page);
	await page.getByRole('link', { name: 'Cleo Heald' }).click();
	await ready(page);
	const grant = async (role: string) => {
		await page.getByLabel('Role', { exact: true }).selectOption({ label: role });
		await page.getByLabel('Study', { exact: true }).selectOption({ index: 1 });
		await page.getByRole('button', { name: 'Grant the role' }).click();
	};
	await grant('auditor');
	await expect(page.getByText('The role is granted.')).toBeVisible();
	await expect(page.getByRole('row', { name: /auditor/ }).getByText('in force')).toBeVisible();
	await grant('study coordinator');
	await expect(page.getByRole('row', { name: /study coordinator/ })).toBeVisible();
	await grant('monitoring board member');
	await expect(page.getByText(/no role in the study team/).first()).toBeVisible();
	await page.getByRole('button', { name: 'End: study coordinator' }).click();
	await expect(page.getByText('The role has ended.')).toBeVisible();
	// Held until today: the firewall counts the day.
	await grant('monitoring board member');
	await expect(page.getByText(/no role in the study team/).first()).toBeVisible();
	await clean(page);

	await page.goto('/people');
	await ready(page);
	await page.getByLabel('Name', { exact: true }).fill('Dora Shed');
	await page.getByLabel('E-mail address').fill('dora@example.org');
	await page.getByRole('button', { name: 'Send the invitation' }).click();
	await expect(page.getByRole('heading', { name: 'Dora Shed' })).toBeVisible();
	await grant('monitoring board member');
	await expect(page.getByText('waits for a second administrator')).toBeVisible();
	await expect(page.getByRole('button', { name: /^Confirm/ })).toHaveCount(0);
	const ben = await (await browser.newContext()).newPage();
	await signIn(ben, 'ben@example.org');
	await ben.goto(page.url());
	await ready(ben);
	await ben.getByRole('button', { name: /^Confirm/ }).click();
	await expect(ben.getByText('The role is confirmed.')).toBeVisible();
	await expect(ben.getByText('in force')).toBeVisible();
	await ben.context().close();
});

test('the auditor finds an event by its filter and reads it in words; the trail stays clean for readers and keys', async ({
	page,
	shared
}) => {
	await asOwner(shared.server.database, (client) =>
		client.query(`update app.site set name = 'Northmoor Hill' where id = $1`, [
			shared.study.siteIds[0]
		])
	);
	await signIn(page, 'cleo@example.org');
	await page.goto(`/studies/${shared.study.studyId}/audit`);
	await ready(page);
	await clean(page);
	await page.getByLabel('Record', { exact: true }).selectOption({ label: 'site' });
	await page.getByLabel('What happened').selectOption({ label: 'changed' });
	await page.getByRole('button', { name: 'Find', exact: true }).press('Enter');
	await expect(page).toHaveURL(/record=site/);
	const row = page.getByRole('row', { name: /changed: site/ });
	await expect(row).toHaveCount(1);
	await expect(row).toContainText('Northmoor');
	await expect(row).toContainText('Northmoor Hill');
	await page.getByLabel('Subject number').fill('99-9999-9');
	await page.getByRole('button', { name: 'Find', exact: true }).click();
	await expect(page.getByText('Nothing found')).toBeVisible();
	await clean(page);
	await page.getByRole('link', { name: 'Everything' }).click();
	const download = page.waitForEvent('download');
	await page.getByRole('link', { name: /^Export/ }).click();
	expect((await download).suggestedFilename()).toBe('audit-trail.csv');
});

test('without scripts a person signs in, sees the own sessions and signs out', async ({
	browser,
	shared
}) => {
	const context = await browser.newContext({
		javaScriptEnabled: false,
		baseURL: shared.server.origin
	});
	const page = await context.newPage();
	await page.goto('/sign-in');
	await page.getByLabel('E-mail address').fill('cleo@example.org');
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.goto('/account');
	await expect(page.getByText('this one')).toBeVisible();
	await page.getByRole('button', { name: 'End all others' }).click();
	await expect(page.getByText('All other sessions have ended.')).toBeVisible();
	await page.getByRole('main').getByRole('button', { name: 'Sign out' }).click();
	await expect(page.getByText('You are signed out.')).toBeVisible();
	await page.goto('/account');
	await expect(page).toHaveURL(/\/sign-in/);
	await context.close();
});
