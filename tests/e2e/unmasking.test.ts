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
	} finally {
		await server.stop();
	}
});
