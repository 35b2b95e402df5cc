import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test as base, type Browser, type Locator, type Page } from '@playwright/test';
import { addPerson, addRole } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';

interface Shared {
	server: RunningServer;
	/** A new data manager's e-mail address. */
	manager(name: string): Promise<string>;
}

const test = base.extend<object, { shared: Shared }>({
	shared: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer();
			const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
			const manager = async (name: string) => {
				const email = `${name.toLowerCase().replace(' ', '.')}@example.org`;
				const id = await addPerson(server.database, { email, name, passwordHash });
				await addRole(server.database, id, 'data_manager', null, null);
				return email;
			};
			await use({ server, manager });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	],
	baseURL: async ({ shared }, use) => use(shared.server.origin)
});
test.describe.configure({ mode: 'serial', timeout: 60_000 });
test.use({ actionTimeout: 10_000 });

const ready = (page: Page) => page.locator('html[data-ready]').waitFor();

async function signIn(page: Page, email: string) {
	await page.goto('/sign-in');
	await ready(page);
	await page.getByLabel('E-mail address').fill(email);
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.waitForURL((url) => !url.pathname.startsWith('/sign-in'));
}

async function axe(page: Page) {
	const { violations } = await new AxeBuilder({ page }).analyze();
	expect(
		violations.map((each) => `${each.id}: ${each.nodes.map((node) => node.html).join(' ')}`)
	).toEqual([]);
}

/** Presses a button or follows a link as the keyboard does. */
async function press(target: Locator) {
	await target.focus();
	await target.press('Enter');
}
const kept = (page: Page) => expect(page.getByText('kept', { exact: true })).toBeVisible();
const keep = async (page: Page, name: string) => {
	await press(page.getByRole('form').getByRole('button', { name: 'Keep' }));
	await expect(page.getByRole('form', { name, exact: true })).toBeVisible();
	await expect(page.getByText('not kept')).toHaveCount(0);
	await kept(page);
};
/** Goes to a part of set-up. */
const part = async (page: Page, name: string) => {
	await press(page.getByRole('navigation', { name: 'Parts of set-up' }).getByText(name));
	await expect(page.getByRole('heading', { name, level: 1 })).toBeVisible();
};
/** Adds an item and types the name it gets; the name has the focus by itself. */
async function add(page: Page, what: string, made: string | RegExp, name: string) {
	await press(page.getByRole('button', { name: `Add ${what}`, exact: true }));
	const form = page.getByRole('form', { name: made });
	const field = form.getByLabel('Name', { exact: true });
	await expect(field).toBeFocused();
	await field.fill(name);
	return form;
}

test('a two-arm study is set up from nothing by keyboard, checked, and published', async ({
	page,
	shared
}) => {
	await signIn(page, await shared.manager('Mara Quist'));
	await page.goto('/studies/new');
	await ready(page);
	await press(page.getByRole('link', { name: 'Nothing' }));
	await expect(page.getByRole('heading', { name: 'New study from nothing' })).toBeVisible();
	await page.getByLabel('Study code').fill('WARP-1');
	await page.getByLabel('Name', { exact: true }).fill('Warp');
	await axe(page);
	await press(page.getByRole('button', { name: 'Make the draft' }));
	await expect(page.getByRole('heading', { name: 'Set-up' })).toBeVisible();
	await expect(page.getByText(/^There is no site yet/)).toBeVisible();

	await part(page, 'Arms and strata');
	await add(page, 'an arm', /^Arm 1/, 'Linen');
	await page.keyboard.press('Enter');
	await expect(page.getByRole('link', { name: 'Linen (1)' })).toBeVisible();
	await add(page, 'an arm', /^Arm 2/, 'Hemp');
	await page.getByLabel('Share').fill('0');
	await page.keyboard.press('Enter');
	await expect(page.getByText('Give a number from 1 to 10.').first()).toBeVisible();
	await page.getByLabel('Share').fill('2');
	await page.keyboard.press('Enter');
	await expect(page.getByText('in the ratio 1 to 2: Linen (1), Hemp (2).')).toBeVisible();
	await axe(page);

	await part(page, 'Sites');
	const site = await add(page, 'a site', /^01 Site 01/, 'Northmoor');
	await site.getByLabel('Time zone').fill('Europe/London');
	await page.keyboard.press('Enter');
	await expect(page.getByRole('link', { name: '01 Northmoor' })).toBeVisible();
	await axe(page);

	await part(page, 'Visits');
	for (const months of ['1', '2', '3']) {
		const visit = await add(page, 'a visit', 'New visit', `Month ${months}`);
		await visit.getByLabel('Target: how many', { exact: true }).fill(months);
		await page.keyboard.press('Enter');
		await expect(page.getByText(`${months} month${months === '1' ? '' : 's'} after`)).toBeVisible();
	}
	await page.getByLabel('Example: enrolled and randomised on').fill('2026-01-31');
	await page.getByRole('link', { name: 'Month 1', exact: true }).press('Enter');
	await expect(page.getByText('Sat 28 February 2026')).toBeVisible();
	await page.getByRole('link', { name: 'Month 2', exact: true }).press('Enter');
	await expect(page.getByText('Tue 31 March 2026')).toBeVisible();
	await axe(page);

	await part(page, 'Measures');
	await page.getByRole('link', { name: 'Primary measure' }).press('Enter');
	const weight = page.getByRole('form', { name: 'Primary measure', exact: true });
	await weight.getByLabel('Name', { exact: true }).fill('Weight');
	await weight.getByLabel('Unit', { exact: true }).selectOption('kg');
	await weight.getByLabel('Accepted from').fill('20');
	await weight.getByLabel('Accepted to').fill('350');
	await keep(page, 'Weight');
	const height = await add(page, 'a measure', 'New measure', 'Height');
	await height.getByLabel('Unit', { exact: true }).selectOption('cm');
	await height.getByLabel('Accepted from').fill('100');
	await height.getByLabel('Accepted to').fill('250');
	await keep(page, 'Height');
	const index = await add(page, 'a measure', 'New measure', 'Body mass index');
	await index.getByLabel('Kind').selectOption('derived');
	await index.getByLabel('Weight', { exact: true }).selectOption({ label: 'Weight' });
	await index.getByLabel('Height', { exact: true }).selectOption({ label: 'Height' });
	await keep(page, 'Body mass index');
	await axe(page);

	// The grid: arrows, space, a whole column, and the way back.
	await part(page, 'Schedule of activities');
	const grid = page.getByRole('grid');
	const cell = (row: number, column: number) =>
		grid.getByRole('row').nth(row).getByRole('gridcell').nth(column);
	await cell(1, 0).focus();
	for (const key of ['ArrowRight', ' ', 'ArrowRight', ' ', 'End', ' '])
		await page.keyboard.press(key);
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(4);
	await page.keyboard.press('ArrowUp');
	await expect(grid.getByRole('columnheader', { name: 'Month 3' })).toBeFocused();
	await page.keyboard.press(' ');
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(6);
	await kept(page);
	await page.keyboard.press('Control+z');
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(4);
	await kept(page);
	await page.keyboard.press('Control+y');
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(6);
	await page.keyboard.press('Home');
	await page.keyboard.press('ArrowLeft');
	await page.keyboard.press(' ');
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(8);
	await cell(1, 3).click();
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(7);
	await cell(1, 3).click();
	await expect(grid.getByRole('gridcell', { name: 'measured', exact: true })).toHaveCount(8);
	await kept(page);
	await axe(page);

	await part(page, 'Eligibility and consent');
	await press(page.getByRole('button', { name: 'Add a criterion' }));
	await page.getByLabel('Text').fill('Aged 18 years or over.');
	await keep(page, 'Aged 18 years or over.');
	await press(page.getByRole('button', { name: 'Add a consent version' }));
	await page.getByLabel('Approved on').fill('2026-01-05');
	await page.keyboard.press('Enter');
	await kept(page);
	await axe(page);

	await press(page.getByRole('link', { name: 'Overview' }));
	await expect(page.getByRole('main')).toContainText('Nothing found.');
	await press(page.getByRole('button', { name: 'Publish version 1' }));
	await expect(page.getByText('Published. The study is open.')).toBeVisible();
	await expect(page.getByText('Two arms, allocated by chance in the ratio 1 to 2')).toBeVisible();
	const [rows] = await shared.server.database.sql(
		`select v.key, v.position, (select count(*)::int from app.planned_measure g where g.planned_visit_id = v.id) as cells
			from app.planned_visit v order by v.position`
	);
	expect(rows).toEqual([
		{ key: 'baseline', position: 1, cells: 3 },
		{ key: 'month-1', position: 2, cells: 1 },
		{ key: 'month-2', position: 3, cells: 1 },
		{ key: 'month-3', position: 4, cells: 3 }
	]);
});

async function another(browser: Browser, shared: Shared, email: string): Promise<Page> {
	const context = await browser.newContext({ baseURL: shared.server.origin });
	const page = await context.newPage();
	await signIn(page, email);
	return page;
}

test('two people on one draft see each other’s change or a conflict, and nothing typed is lost', async ({
	browser,
	shared
}) => {
	const mara = await another(browser, shared, await shared.manager('Mara Lund'));
	const odo = await another(browser, shared, await shared.manager('Odo Vent'));
	const answer = await mara.request.post('/api/studies', {
		headers: { origin: shared.server.origin },
		data: {
			template: 'two-arm-trial',
			code: 'WEFT-1',
			name: 'Weft',
			masked: true,
			training: false,
			sites: [{ name: 'Northmoor', zone: 'Europe/London' }]
		}
	});
	const { studyId } = (await answer.json()) as { studyId: string };
	for (const page of [mara, odo]) {
		await page.goto(`/studies/${studyId}/setup/visits?list=visits&item=month-3`);
		await ready(page);
	}
	const name = (page: Page) => page.getByRole('form').getByLabel('Name', { exact: true });

	// Odo is typing while Mara's change arrives on his screen.
	await odo.getByLabel('Room needed').fill('55');
	await name(mara).fill('Quarter');
	await mara.keyboard.press('Enter');
	await expect(odo.getByText('Changed by Mara Lund a moment ago:')).toBeVisible({
		timeout: 15_000
	});
	await expect(name(odo)).toHaveValue('Quarter');
	await expect(odo.getByLabel('Room needed')).toHaveValue('55');
	await odo.getByRole('button', { name: 'Keep' }).click();
	await expect(odo.getByText('not kept')).toHaveCount(0);

	// Both set the same field before either screen learns of the other.
	await expect(mara.getByLabel('Room needed')).toHaveValue('55', { timeout: 15_000 });
	let learns = false;
	await odo.route('**/protocol/changes?*', (route) => (learns ? route.fallback() : route.abort()));
	await odo.route('**/protocol', (route) => {
		learns = true;
		return route.fallback();
	});
	await name(mara).fill('Third month');
	await name(odo).fill('Month three');
	await mara.keyboard.press('Enter');
	await expect(mara.getByRole('button', { name: 'Keep' })).toBeDisabled();
	await kept(mara);
	await odo.getByRole('button', { name: 'Keep' }).click();
	const conflict = odo.getByRole('alert').filter({ hasText: 'Your change was not kept' });
	await expect(conflict).toContainText('name from “Quarter” to “Third month”');
	await expect(conflict).toContainText('Both of you changed the same thing.');
	await expect(name(odo)).toHaveValue('Month three');
	await axe(odo);
	await odo.getByRole('button', { name: 'Apply mine on top' }).click();
	await expect(name(mara)).toHaveValue('Month three', { timeout: 15_000 });
	await mara.context().close();
	await odo.context().close();
});
