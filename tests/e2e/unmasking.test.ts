import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test, type Page } from '@playwright/test';
import { newId } from '../../src/lib/id';
import { addPerson, addRole, asOwner } from '../support/people';
import { ready, signedIn } from '../support/screens';
import { startServer } from '../support/server';
import { addSubject, around, visitScene } from '../support/visit-scene';

const password = 'linen warp and weft';
const kit = 'K48213-6';

test.describe.configure({ timeout: 240_000 });

async function looked(page: Page, name: string) {
	const folder = process.env.PICTURES_IN;
	for (const [width, colorScheme] of [
		[1280, 'light'],
		[820, 'dark']
	] as const) {
		await page.setViewportSize({ width, height: 1000 });
		await page.emulateMedia({ colorScheme });
		const { violations } = await new AxeBuilder({ page }).analyze();
		expect(
			violations.map((each) => `${each.id}: ${each.nodes.map((node) => node.html).join(' ')}`)
		).toEqual([]);
		expect(await page.evaluate(() => document.documentElement.scrollWidth <= innerWidth + 1)).toBe(
			true
		);
		if (folder)
			await page.screenshot({
				path: `${folder}/${name}-${width}-${colorScheme}.png`,
				fullPage: true
			});
	}
	await page.setViewportSize({ width: 1280, height: 1000 });
	await page.emulateMedia({ colorScheme: 'light' });
}

test('a kit is given at randomisation; in an emergency the investigator is shown the arm once, and the others learn only that it happened', async ({
	browser
}) => {
	const server = await startServer();
	try {
		const { database } = server;
		const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
		const scene = await visitScene(database, { passwordHash });
		const [site] = scene.sites;
		const doctor = 'celia.roon@example.org';
		const id = await addPerson(database, { email: doctor, name: 'Dr Celia Roon', passwordHash });
		await addRole(database, id, 'investigator', scene.studyId, site.id);
		const subject = await addSubject(database, scene, {
			windows: { baseline: around('2026-06-09') }
		});
		const list = newId();
		await asOwner(database, async (client) => {
			await client.query(
				`insert into closed.allocation_list (id, study_id, seed, block_sizes, method, hash) values ($1, $2, 'seed', '{4}', 'a test', 'none')`,
				[list, scene.studyId]
			);
			await client.query(
				`insert into closed.list_position (id, study_id, list_id, stratum, position, arm_key, kit_number) values ($1, $2, $3, '{}', 1, 'b', $4)`,
				[newId(), scene.studyId, list, kit]
			);
		});
		const study = `/studies/${scene.studyId}`;
		const record = `${study}/subjects/${subject.id}`;
		const pageFor = async (email: string) =>
			(await signedIn(browser, server, { email, password })).newPage();

		const desk = await pageFor(site.coordinator.email);
		await desk.goto(record);
		await ready(desk);
		await desk.getByRole('button', { name: 'Randomise' }).click();
		await expect(desk.getByText(`Randomised. Give kit ${kit}.`)).toBeVisible();
		await expect(desk.getByText(/Treatment [AB]/)).toHaveCount(0);

		const page = await pageFor(doctor);
		await page.goto(record);
		await ready(page);
		await page.getByRole('link', { name: 'Emergency unmasking' }).click();
		await expect(
			page.getByRole('heading', { name: 'Emergency unmasking', level: 1 })
		).toBeVisible();
		await ready(page);
		await looked(page, 'unmask');
		await page.getByLabel('Why care depends on knowing it').fill('Unconscious, cause unknown.');
		await page.getByLabel('Your e-mail address').fill(doctor);
		await page.getByLabel('Your password').fill('not the password');
		await page.getByRole('button', { name: 'Show the arm' }).click();
		await expect(page.getByText('Nothing was shown.')).toBeVisible();
		await expect(page.getByText('Treatment B')).toHaveCount(0);
		await page.getByLabel('Your password').fill(password);
		await page.getByRole('button', { name: 'Show the arm' }).click();
		await expect(page.getByText('Treatment B', { exact: true })).toBeVisible();
		await looked(page, 'unmasked');
		await page.reload();
		await ready(page);
		await expect(page.getByText('Treatment B')).toHaveCount(0);
		await page.goto(record);
		await expect(page.getByText('Unmasked: emergency, shown by Heddle')).toBeVisible();
		await expect(page.getByText('Reason: Unconscious, cause unknown.')).toBeVisible();
		await expect(page.getByText(/Treatment [AB]/)).toHaveCount(0);

		const manager = await pageFor(scene.manager.email);
		await manager.goto(study);
		await ready(manager);
		await expect(manager.getByText(`Subject ${subject.number} was unmasked`)).toBeVisible();
		await looked(manager, 'today-notice');
		await manager.getByRole('link', { name: 'All unmaskings' }).click();
		await expect(manager.getByRole('cell', { name: 'Dr Celia Roon', exact: true })).toBeVisible();
		await expect(manager.getByText(/Treatment [AB]/)).toHaveCount(0);
		await ready(manager);
		await looked(manager, 'unmaskings');
		const [mails = []] = await database.sql(
			`select p.email from app.mail m join app.person p on p.id = m.person_id where m.kind = 'unmasking' order by 1`
		);
		expect(mails.map((row) => row.email)).toEqual([doctor, scene.manager.email].sort());
		// Sheets of sealed codes are for who is not masked.
		const unmasked = 'vera.lindt@example.org';
		const unmaskedId = await addPerson(database, {
			email: unmasked,
			name: 'Vera Lindt',
			passwordHash
		});
		await addRole(database, unmaskedId, 'independent_statistician', scene.studyId);
		const sheets = await pageFor(unmasked);
		await sheets.goto(`${study}/codes`);
		await ready(sheets);
		await looked(sheets, 'codes');
		await sheets.getByLabel('Site', { exact: true }).selectOption({ index: 1 });
		await sheets.getByRole('button', { name: 'Make the sheets' }).click();
		await expect(sheets.getByRole('row').filter({ hasText: 'being made' })).toBeVisible();
	} finally {
		await server.stop();
	}
});

test('kits are counted at the sites, filled up, received and written off', async ({ browser }) => {
	const server = await startServer();
	try {
		const { database } = server;
		const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
		const scene = await visitScene(database, { passwordHash });
		const list = newId();
		const kits = Array.from({ length: 40 }, (_, at) => `K${10_000 + at * 17}-0`);
		await asOwner(database, async (client) => {
			await client.query(
				`insert into closed.allocation_list (id, study_id, seed, block_sizes, method, hash, plan) values ($1, $2, 'seed', '{4}', 'a test', 'none', $3)`,
				[
					list,
					scene.studyId,
					JSON.stringify({
						arms: [
							{ key: 'a', ratio: 1 },
							{ key: 'b', ratio: 1 }
						]
					})
				]
			);
			for (const [at, number] of kits.entries())
				await client.query(
					`insert into closed.list_position (id, study_id, list_id, stratum, position, arm_key, kit_number) values ($1, $2, $3, '{}', $4, $5, $6)`,
					[newId(), scene.studyId, list, at + 1, at % 2 ? 'a' : 'b', number]
				);
		});
		const pageFor = async (email: string) =>
			(await signedIn(browser, server, { email, password })).newPage();
		const manager = await pageFor(scene.manager.email);
		const address = `/studies/${scene.studyId}/kits`;
		await manager.goto(address);
		await ready(manager);
		await looked(manager, 'kits-none');
		await manager.getByRole('button', { name: 'Count kits' }).click();
		await expect(manager.getByRole('heading', { name: 'Fill a site up' })).toBeVisible();
		const level = manager.getByRole('group', { name: 'First site' });
		await level.getByLabel('Full stock').fill('21');
		await level.getByRole('button', { name: /^Save/ }).click();
		await expect(level.getByText('Give a multiple of 2')).toBeVisible();
		await level.getByLabel('Full stock').fill('20');
		await level.getByRole('button', { name: /^Save/ }).click();
		await expect(level.getByText('fewer than 11 to give')).toBeVisible();
		await manager.getByLabel('Site', { exact: true }).selectOption({ label: 'First site' });
		await manager.getByLabel('These kits are good until').fill('2031-01-31');
		await manager.getByRole('button', { name: 'Send' }).click();
		await expect(manager.getByText('20 kits are on their way.')).toBeVisible();
		await ready(manager);
		await looked(manager, 'kits-sent');

		const desk = await pageFor(scene.sites[0].coordinator.email);
		await desk.goto(address);
		await ready(desk);
		await desk.getByRole('button', { name: /^Received/ }).click();
		await expect(desk.getByText('20 kits received.')).toBeVisible();
		await expect(desk.getByRole('row', { name: /First site enough 20 20 14/ })).toBeVisible();
		await desk.getByLabel('Kit number').fill('K1');
		await desk.getByLabel('lost').check();
		await desk.getByLabel('What happened').fill('Not in the box.');
		await desk.getByRole('button', { name: 'Take it out of the stock' }).click();
		await expect(desk.getByText('No kit has this number')).toBeVisible();
		await looked(desk, 'kits-desk');
	} finally {
		await server.stop();
	}
});
