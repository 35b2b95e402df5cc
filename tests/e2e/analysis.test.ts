import { execFileSync } from 'node:child_process';
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test as base, type Page } from '@playwright/test';
import type { Role } from '../../src/lib/domain/person/roles';
import { estimateCells } from '../../src/lib/report/format';
import { addPerson, addRole } from '../support/people';
import { expectedFit, orthodontCsv } from '../support/reference';
import { ready } from '../support/screens';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
const test = base.extend<object, { server: RunningServer }>({
	server: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer({ worker: true, lookWorker: true });
			await use(server);
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	],
	baseURL: async ({ server }, use) => use(server.origin)
});

/** `HEDDLE_SHOTS` names a folder for pictures of each step, for a person to look at. */
const shots = process.env.HEDDLE_SHOTS;

async function checked(page: Page, name: string) {
	await ready(page);
	for (const { width, scheme } of [
		{ width: 820, scheme: 'dark' },
		{ width: 1280, scheme: 'light' }
	] as const) {
		await page.setViewportSize({ width, height: 800 });
		await page.emulateMedia({ colorScheme: scheme });
		const { violations } = await new AxeBuilder({ page }).analyze();
		expect(
			violations.map((each) => `${name} ${width}: ${each.id} at ${each.nodes.map((n) => n.html)}`)
		).toEqual([]);
		expect(
			await page.evaluate(() => document.documentElement.scrollWidth - innerWidth),
			`${name} is no wider than ${width}`
		).toBeLessThanOrEqual(1);
		if (shots)
			await page.screenshot({
				path: join(shots, `${name}-${width}-${scheme}.png`),
				fullPage: true
			});
	}
}

async function signIn(page: Page, email: string) {
	await page.goto('/sign-in');
	await ready(page);
	await page.getByLabel('E-mail address').fill(email);
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.waitForURL((url) => !url.pathname.startsWith('/sign-in'));
}

test('the growth data of Potthoff and Roy (1964) come in by a file, are cut and looked at by sex, and the board member reads the reference estimates in the PDF', async ({
	browser,
	server
}) => {
	test.setTimeout(240_000);
	const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
	const account = async (name: string, role: Role, studyId: string | null) => {
		const email = `${role}@example.org`;
		const id = await addPerson(server.database, { email, name, passwordHash });
		await addRole(server.database, id, role, studyId);
		return email;
	};
	const as = async (email: string) => {
		const context = await browser.newContext({ baseURL: server.origin, acceptDownloads: true });
		const page = await context.newPage();
		page.on('pageerror', (error) => errors.push(error.message));
		await signIn(page, email);
		return page;
	};
	const errors: string[] = [];

	const manager = await as(await account('Mara Quist', 'data_manager', null));
	const made = await manager.request.post('/api/studies', {
		headers: { origin: server.origin },
		data: {
			template: 'imported-data',
			code: 'GROWTH-01',
			name: 'Growth of the jaw',
			masked: false,
			training: false,
			sites: [{ name: 'Northmoor', zone: 'Europe/London' }]
		}
	});
	expect(made.status()).toBe(201);
	const { studyId } = (await made.json()) as { studyId: string };
	const place = `/studies/${studyId}`;

	// Import: a file with a mistake is told by row and column; the mended one comes in whole.
	await manager.goto(`${place}/import`);
	await checked(manager, 'import');
	const hand = async (name: string, text: string) => {
		await manager.goto(`${place}/import`);
		await ready(manager);
		await manager
			.getByLabel('File (CSV, UTF-8)')
			.setInputFiles({ name, mimeType: 'text/csv', buffer: Buffer.from(text) });
		await manager.getByRole('button', { name: 'Hand in the file' }).click();
		await expect(manager.getByRole('heading', { name, level: 1 })).toBeVisible();
		await ready(manager);
	};
	const say = async () => {
		await expect(manager.getByLabel('What subject holds')).toHaveValue('subject');
		await expect(manager.getByLabel('What sex holds')).toHaveValue('choice');
		// A spoiled cell hides that the column holds numbers; a person says so.
		await manager.getByLabel('What distance holds').selectOption('measure');
		await manager.getByLabel('What sex is called').fill('Sex');
		await manager.getByLabel('What distance is called').fill('Distance');
		await manager.getByLabel('Unit of distance').selectOption('mm');
		await manager.getByLabel('Decimals of distance').selectOption('1');
		await manager.getByLabel('Time as a number is in').selectOption('year');
		await manager.getByRole('button', { name: 'Check every row' }).click();
	};
	await hand('spoiled.csv', orthodontCsv().replace('M02,1,0,boy,21.5', 'M02,1,0,boy,21;5'));
	await checked(manager, 'import-mapping');
	await say();
	const problem = manager.getByRole('row', { name: /not a number/ });
	await expect(problem).toContainText('distance');
	await expect(problem).toContainText('6');
	await checked(manager, 'import-problems');
	await hand('growth.csv', orthodontCsv());
	await expect(manager.getByLabel('What distance holds')).toHaveValue('measure');
	await expect(manager.getByLabel('Decimals of distance')).toHaveValue('1');
	await say();
	await expect(manager.getByText('27, 27 of them new')).toBeVisible();
	await checked(manager, 'import-checked');
	await manager.getByRole('button', { name: 'Import 108 values' }).click();
	await expect(manager.getByRole('heading', { name: 'What was imported' })).toBeVisible({
		timeout: 30_000
	});
	await checked(manager, 'import-done');

	// Cut and look: the trial statistician's.
	const statistician = await as(await account('Ines Okafor', 'statistician', studyId));
	const boardEmail = await account('Berit Halvorsen', 'board_member', studyId);
	await statistician.goto(`${place}/cuts`);
	await checked(statistician, 'cuts-empty');
	await statistician.getByLabel('Name', { exact: true }).fill('First look');
	await statistician.getByRole('button', { name: 'Freeze the cut' }).click();
	await expect(statistician.getByText('27 subjects · 108 measurements')).toBeVisible();
	await statistician.getByRole('button', { name: 'Make cut 1 again and compare' }).click();
	await expect(statistician.getByText('the same fingerprint')).toBeVisible();
	await checked(statistician, 'cuts');

	await statistician.goto(`${place}/looks`);
	await checked(statistician, 'looks-empty');
	// The sentence answers to the keyboard: its slots are ordinary lists.
	const group = statistician.getByRole('combobox', { name: 'who is compared' }).first();
	await group.focus();
	await statistician.keyboard.press('ArrowDown');
	await expect(group).toHaveValue('characteristic:sex');
	await expect(
		statistician.getByRole('combobox', { name: 'measure', exact: true }).first()
	).toHaveValue('distance');
	await expect(statistician.getByRole('combobox', { name: 'time scale' }).first()).toHaveValue(
		'as given'
	);
	await checked(statistician, 'look-form');
	await statistician.getByRole('button', { name: 'Look', exact: true }).focus();
	await statistician.keyboard.press('Enter');
	await statistician.waitForURL(/\/looks\/[0-9a-f-]{36}$/);
	await expect(statistician.getByRole('heading', { name: 'Estimates' })).toBeVisible({
		timeout: 30_000
	});
	await checked(statistician, 'look');
	await statistician.getByRole('button', { name: 'Make the report' }).click();
	await expect(statistician.getByRole('link', { name: 'Download the report (PDF)' })).toBeVisible({
		timeout: 30_000
	});
	await statistician.getByLabel('Berit Halvorsen').check();
	await statistician.getByRole('button', { name: 'Release' }).click();
	await expect(async () => {
		await statistician.reload();
		await expect(statistician.getByText('released', { exact: true })).toBeVisible({ timeout: 500 });
	}).toPass({ timeout: 30_000 });
	await checked(statistician, 'look-released');

	// The board member, who sees the board room and nothing else of the study.
	const board = await as(boardEmail);
	await board.goto(`${place}/board`);
	await checked(board, 'board');
	for (const path of ['looks', 'cuts', 'import'])
		expect((await board.request.get(`${place}/${path}`)).status(), path).toBe(403);
	const [download] = await Promise.all([
		board.waitForEvent('download'),
		board.getByRole('link', { name: 'Download the report of look 1' }).click()
	]);
	expect(download.suggestedFilename()).toBe('report.pdf');
	const file = join(server.database.files, 'board.pdf');
	writeFileSync(file, readFileSync(await download.path()));
	const text = execFileSync('pdftotext', ['-layout', file, '-'], { encoding: 'utf8' });
	expect(text).toContain('Copy for Berit Halvorsen');
	// Reference: time is age minus 8 years, boys are what girls are compared with.
	const expected = expectedFit('orthodont');
	for (const [theirs, label] of [
		['(Intercept)', 'Level at study time 0 years, boy'],
		['time', 'Change per year, boy'],
		['arm', 'Difference in level at study time 0 years, girl minus boy'],
		['time:arm', 'Difference in change per year, girl minus boy']
	] as const) {
		const row = expected.coef_tests[theirs]?.kr;
		if (!row) throw new Error(`The reference has no row ${theirs}`);
		const cells = estimateCells({
			estimate: expected.beta[theirs] as number,
			standardError: row.se ?? (expected.se[theirs] as number),
			df: row.df,
			t: row.t,
			p: row.p,
			lower: row.ci_lower,
			upper: row.ci_upper
		});
		// A long name is broken over lines; its numbers stand on one.
		const lines = text.replace(/[ \t]+/g, ' ').split('\n');
		expect(
			lines.some((line) =>
				[cells.estimate, cells.se, cells.interval, cells.df, cells.t, cells.p].every((cell) =>
					line.includes(cell)
				)
			),
			`${label}: ${JSON.stringify(cells)}`
		).toBe(true);
	}
	expect(text).toContain((expected.varcomp.tau2_intercept as number).toFixed(3));
	expect(text).toContain(expected.varcomp.sigma2.toFixed(3));

	await board.reload();
	await expect(board.getByText('You downloaded it once.')).toBeVisible();
	await ready(board);
	await board.getByLabel('The board advises to').selectOption('continue unchanged');
	await board.getByLabel('Reason').fill('Nothing stands against it.');
	await board.getByLabel('Day of the meeting').fill('2026-01-15');
	await board.getByLabel('Who was there').fill('Berit Halvorsen and two others');
	await board.getByRole('button', { name: 'Record the recommendation' }).click();
	await expect(
		board.getByRole('region', { name: 'Recommendations' }).getByText('Continue unchanged')
	).toBeVisible();
	await expect(board.getByText('The recommendation is recorded.')).toBeVisible();
	await checked(board, 'board-advised');
	await manager.goto(`${place}/board`);
	await expect(manager.getByText('Nothing stands against it.')).toBeVisible();
	await checked(manager, 'board-team');
	expect(errors).toEqual([]);
});
