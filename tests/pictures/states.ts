import type { Page } from '@playwright/test';
import { expect, test } from '../support/browser';
import { orthodontCsv } from '../support/reference';
import { ready, screensByRole, signedIn } from '../support/screens';
import { takePictures } from './support/take';

/**
 * What a page looks like only while somebody works on it. These errands change the demo, so they come after
 * the pictures of every screen (files run in the order of their names).
 */
const folder = 'in the middle of work';

async function as(
	{ browser, heddle }: Pick<Parameters<Parameters<typeof test>[2]>[0], 'browser' | 'heddle'>,
	role: string
) {
	const mine = (await screensByRole(heddle)).find((each) => each.account.role === role);
	if (!mine) throw new Error(`The demo has no ${role}`);
	const context = await signedIn(browser, heddle, mine.account);
	const page = await context.newPage();
	const path = (pattern: RegExp): string => {
		const found = mine.screens.find((each) => pattern.test(each.name));
		if (!found) throw new Error(`The ${role} has no screen like ${pattern}`);
		return found.path;
	};
	const open = async (to: string) => {
		await page.goto(to);
		await ready(page);
	};
	return { page, path, open };
}

const picture = async (page: Page, name: string) => {
	await ready(page);
	await takePictures(page, folder, name);
};

test('pictures of a visit being measured', async ({ browser, heddle }) => {
	test.setTimeout(300_000);
	const { page, path, open } = await as({ browser, heddle }, 'research nurse');
	await page.setViewportSize({ width: 820, height: 1180 });
	await open(path(/visits-visit-open$/));
	await picture(page, 'visit 1 before the start');
	await page.getByRole('button', { name: 'Start the visit' }).click();
	await expect(page.getByText('All entered values are kept')).toBeVisible();
	await picture(page, 'visit 2 started');
	const card = (name: string) => page.locator(`[data-measure="${name}"]`);
	const creatinine = card('creatinine').locator('input[data-entry]');
	await creatinine.fill('15000');
	await creatinine.press('Enter');
	await expect(card('creatinine')).toContainText('is outside what this study accepts');
	await picture(page, 'visit 3 refused');
	await creatinine.fill('320');
	await creatinine.press('Enter');
	await expect(card('creatinine')).toContainText('possible, but unusual');
	await picture(page, 'visit 4 asked');
	await card('creatinine').getByRole('button', { name: 'Measured again: keep 320' }).click();
	await card('potassium').getByRole('button', { name: 'Not done…' }).click();
	await card('potassium').getByLabel('Why it was not done').selectOption('Sample not usable');
	await page.getByRole('button', { name: 'Finish visit' }).click();
	await picture(page, 'visit 5 not finished yet');
	await page.context().setOffline(true);
	await card('weight').locator('input[data-entry]').fill('78');
	await page.keyboard.press('Enter');
	await expect(page.getByText('No network · 1 value waits')).toBeVisible();
	await takePictures(page, folder, 'visit 6 no network');
	await page.context().setOffline(false);
	await page.context().close();
});

test('pictures of a history over the page', async ({ browser, heddle }) => {
	const { page, path, open } = await as({ browser, heddle }, 'study coordinator');
	await open(path(/subjects-subject/));
	await page
		.getByRole('link', { name: /^History of Serum creatinine/ })
		.first()
		.click();
	await expect(page.getByRole('dialog')).toContainText('research nurse');
	await picture(page, 'history of a value');
	await page.context().close();
});

test('pictures of a study being set up and a file being brought in', async ({
	browser,
	heddle
}) => {
	test.setTimeout(300_000);
	const { page, open } = await as({ browser, heddle }, 'data manager');
	const make = async (template: string, code: string) => {
		const answer = await page.request.post('/api/studies', {
			headers: { origin: heddle.origin },
			data: {
				template,
				code,
				name: 'Harrowgate',
				masked: template === 'two-arm-trial',
				training: true,
				sites: [{ name: 'Northmoor', zone: 'Europe/London' }]
			}
		});
		expect(answer.status()).toBe(201);
		return ((await answer.json()) as { studyId: string }).studyId;
	};
	const draft = await make('two-arm-trial', 'HGT-01');
	await open(`/studies/${draft}/schedule`);
	await picture(page, 'draft schedule');
	for (const [part, name] of [
		['', 'overview'],
		['/arms?list=strata&item=kidney-function', 'arms'],
		['/sites?list=sites&item=01', 'sites'],
		['/visits?list=visits&item=month-1', 'visits'],
		['/measures?list=measures&item=egfr', 'derived measure'],
		['/measures?list=measures&item=weight', 'measure'],
		['/schedule', 'grid'],
		['/eligibility?list=eligibility&item=adult', 'eligibility']
	] as const) {
		await open(`/studies/${draft}/setup${part}`);
		await picture(page, `draft set-up ${name}`);
	}

	const imported = await make('imported-data', 'HGT-02');
	await open(`/studies/${imported}/import`);
	await page.getByLabel('File (CSV, UTF-8)').setInputFiles({
		name: 'spoiled.csv',
		mimeType: 'text/csv',
		buffer: Buffer.from(orthodontCsv().replace('M02,1,0,boy,21.5', 'M02,1,0,boy,21;5'))
	});
	await page.getByRole('button', { name: 'Hand in the file' }).click();
	await expect(page.getByRole('heading', { name: 'spoiled.csv', level: 1 })).toBeVisible();
	await picture(page, 'import 1 columns');
	await page.getByLabel('What distance holds').selectOption('measure');
	await page.getByLabel('What sex is called').fill('Sex');
	await page.getByLabel('What distance is called').fill('Distance');
	await page.getByLabel('Unit of distance').selectOption('mm');
	await page.getByLabel('Time as a number is in').selectOption('year');
	await page.getByRole('button', { name: 'Check every row' }).click();
	await expect(page.getByRole('row', { name: /not a number/ })).toBeVisible({ timeout: 30_000 });
	await picture(page, 'import 2 problems');
	await page.context().close();
});

test('pictures of a look being asked', async ({ browser, heddle }) => {
	const { page, path, open } = await as({ browser, heddle }, 'trial statistician');
	await open(path(/^larkfield-looks$/));
	await page
		.getByRole('combobox', { name: 'who is compared' })
		.first()
		.selectOption('characteristic:sex');
	await picture(page, 'look being asked');
	await page.context().close();
});
