import { hash } from '@node-rs/argon2';
import { expect, test as base, type Browser, type Page } from '@playwright/test';
import { looked } from '../support/looked';
import { addPerson, addRole } from '../support/people';
import { startServer, type RunningServer } from '../support/server';
import { ready, signedIn } from '../support/screens';
import { visitScene, type Scene } from '../support/visit-scene';

const password = 'linen warp and weft';

interface Shared {
	server: RunningServer;
	scene: Scene;
	investigator: string;
}

const test = base.extend<object, { shared: Shared }>({
	shared: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer();
			const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
			const scene = await visitScene(server.database, { passwordHash });
			const investigator = 'celia.roon@example.org';
			const id = await addPerson(server.database, {
				email: investigator,
				name: 'Dr Celia Roon',
				passwordHash
			});
			await addRole(server.database, id, 'investigator', scene.studyId, scene.sites[0].id);
			await use({ server, scene, investigator });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	]
});
test.describe.configure({ mode: 'serial', timeout: 240_000 });

async function pageOf(browser: Browser, shared: Shared, email: string): Promise<Page> {
	const context = await signedIn(browser, shared.server, { email, password });
	return context.newPage();
}

test('screening, consent and answers; the investigator signs; a later change breaks the signature; it is signed again', async ({
	browser,
	shared
}) => {
	const { studyId, sites } = shared.scene;
	const study = `/studies/${studyId}`;
	const desk = await pageOf(browser, shared, sites[0].coordinator.email);
	const doctor = await pageOf(browser, shared, shared.investigator);

	await doctor.goto(study);
	await ready(doctor);
	await expect(doctor.getByText('Nothing waits for your signature')).toBeVisible();

	// The coordinator screens two people.
	const screenings: string[] = [];
	for (let n = 0; n < 2; n++) {
		await desk.goto(`${study}/screening`);
		await ready(desk);
		await desk.getByRole('button', { name: 'Add to the log' }).click();
		await expect(desk.getByRole('heading', { name: /^Screening \d\d\/\d/ })).toBeVisible();
		screenings.push(desk.url());
		await expect(desk.getByText('Not every criterion is answered yet.')).toBeVisible();
		await desk.getByLabel('Signed by').selectOption('participant');
		await desk.getByLabel(/^at \(/).fill('00:00');
		await desk.getByLabel('A copy of what was signed was given').check();
		await desk.getByRole('button', { name: 'Record the consent' }).click();
		await expect(desk.getByText('explained by Cora Brandt')).toBeVisible();
		for (const group of await desk.getByRole('group').filter({ hasText: 'inclusion:' }).all())
			await group.getByLabel('yes').check();
		for (const group of await desk.getByRole('group').filter({ hasText: 'exclusion:' }).all())
			await group.getByLabel('no').check();
		await desk.getByRole('button', { name: 'Keep the answers' }).click();
		await expect(desk.getByText('The answers are kept.')).toBeVisible();
		await expect(desk.getByText('It waits for the site’s investigator')).toBeVisible();
	}

	// Both wait on the investigator's Today; each is shown before it is signed.
	await doctor.goto(study);
	await ready(doctor);
	await looked(doctor, 'today');
	await doctor.getByRole('link', { name: 'Read and sign 2 records' }).click();
	await expect(doctor.getByRole('heading', { name: 'To sign', level: 1 })).toBeVisible();
	await expect(doctor.getByRole('button', { name: 'Sign', exact: true })).toBeDisabled();
	for (const box of await doctor.getByRole('checkbox').all()) await box.check();
	await doctor.getByText('What you sign').first().click();
	await expect(doctor.getByText(/^Inclusion: /).first()).toBeVisible();
	await looked(doctor, 'to-sign');
	await doctor.getByLabel('Your e-mail address').fill(shared.investigator);
	await doctor.getByLabel('Your password').fill('not the password');
	await doctor.getByRole('button', { name: 'Sign 2 records' }).click();
	await expect(doctor.getByText('Nothing was signed.')).toBeVisible();
	await expect(doctor.getByText('Enter your own address and password.')).toBeVisible();
	await expect(doctor.getByLabel('Your password')).toHaveValue('');
	await looked(doctor, 'refused');

	// One changes while the investigator reads: nothing is signed, and it is shown again.
	await desk.goto(screenings[1] as string);
	await ready(desk);
	const turned = desk.getByRole('group').filter({ hasText: 'inclusion:' }).first();
	await turned.getByLabel('no').check();
	await desk.getByRole('button', { name: 'Keep the answers' }).click();
	await expect(desk.getByText('The answers are kept.')).toBeVisible();
	for (const box of await doctor.getByRole('checkbox').all()) await box.check();
	await doctor.getByLabel('Your password').fill(password);
	await doctor.getByRole('button', { name: 'Sign 2 records' }).click();
	await expect(doctor.getByText('changed after it was shown to you')).toBeVisible();
	await expect(doctor.getByRole('checkbox')).toHaveCount(1);

	// By keyboard: the box, the password, the button.
	const box = doctor.getByRole('checkbox');
	if (!(await box.isChecked())) {
		await box.focus();
		await doctor.keyboard.press('Space');
	}
	await doctor.getByLabel('Your e-mail address').fill(shared.investigator);
	await doctor.getByLabel('Your password').fill(password);
	await doctor.keyboard.press('Enter');
	await expect(doctor.getByText('Signed.', { exact: true })).toBeVisible();
	await expect(doctor.getByText('Nothing waits for your signature')).toBeVisible();
	await looked(doctor, 'signed');

	// The record shows printed name, meaning, date and time with the zone.
	await desk.goto(screenings[0] as string);
	await ready(desk);
	await expect(
		desk.getByText(/signed by Dr Celia Roon, site investigator, on .*Europe\/\w+ \(/)
	).toBeVisible();
	await expect(desk.getByText('I have checked the eligibility of this person')).toBeVisible();
	await expect(desk.getByText('stands', { exact: true })).toBeVisible();
	await looked(desk, 'record-signed');

	// A later change breaks it, and says who and when; changed back it waits for a new signature.
	const first = desk.getByRole('group').filter({ hasText: 'inclusion:' }).first();
	for (const answer of ['no', 'yes']) {
		await first.getByLabel(answer).check();
		await desk.getByRole('button', { name: 'Keep the answers' }).click();
		await expect(desk.getByText('broken by a change')).toBeVisible();
		await expect(
			desk.getByText(answer === 'no' ? 'Not every criterion is met.' : 'to sign again')
		).toBeVisible();
	}
	await expect(desk.getByText(/Changed on .* by\s+Cora Brandt/)).toBeVisible();
	await looked(desk, 'record-broken');
	await desk.getByRole('link', { name: 'What was signed, and what changed' }).click();
	await expect(desk.getByRole('heading', { name: 'What changed since' })).toBeVisible();
	await looked(desk, 'signature-broken');

	// Later in the same session the password is enough.
	await doctor.goto(screenings[0] as string);
	await ready(doctor);
	await doctor.getByRole('link', { name: 'Sign again' }).click();
	await expect(doctor.getByLabel('Your password')).toBeVisible();
	await expect(doctor.getByLabel('Your e-mail address')).toHaveCount(0);
	await looked(doctor, 'sign-again');
	await doctor.getByLabel('Your password').fill(password);
	await doctor.getByRole('button', { name: 'Sign', exact: true }).click();
	await expect(doctor.getByText('Signed.', { exact: true })).toBeVisible();
	await desk.goto(screenings[0] as string);
	await ready(desk);
	await expect(desk.getByText('stands', { exact: true })).toBeVisible();
	await expect(desk.getByText('broken by a change')).toBeVisible();
});

test('who has no password here is told how to get one, and signing works without JavaScript', async ({
	browser,
	shared
}) => {
	const { studyId, sites } = shared.scene;
	const desk = await pageOf(browser, shared, sites[0].coordinator.email);
	await desk.goto(`/studies/${studyId}/screening`);
	await ready(desk);
	await desk.getByRole('link', { name: /\/2$/ }).click();
	await expect(desk.getByRole('heading', { name: /\/2$/ })).toBeVisible();
	await desk.getByRole('group').filter({ hasText: 'inclusion:' }).first().getByLabel('yes').check();
	await desk.getByRole('button', { name: 'Keep the answers' }).click();
	await expect(desk.getByText('It waits for the site’s investigator')).toBeVisible();

	const context = await browser.newContext({ javaScriptEnabled: false });
	const page = await context.newPage();
	await page.goto(`${shared.server.origin}/sign-in`);
	await page.getByLabel('E-mail address').fill(shared.investigator);
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();

	const secret = `(select password_hash from app.person where email = '${shared.investigator}')`;
	const [[kept] = []] = await shared.server.database.sql(`select ${secret} as hash`);
	const set = (value: string) =>
		shared.server.database.sql(
			`set session_replication_role = replica; update app.person set password_hash = ${value} where email = '${shared.investigator}'`
		);
	await set('null');
	await page.goto(`${shared.server.origin}/studies/${studyId}/signing`);
	await expect(page.getByText('Signing needs a password of your own')).toBeVisible();
	await set(`'${kept.hash}'`);

	await page.goto(`${shared.server.origin}/studies/${studyId}/signing`);
	await page.getByRole('checkbox').check();
	await page.getByLabel('Your e-mail address').fill(shared.investigator);
	await page.getByLabel('Your password').fill(password);
	await page.getByRole('button', { name: 'Sign', exact: true }).click();
	await expect(page.getByText('Signed.', { exact: true })).toBeVisible();
	await context.close();
});
