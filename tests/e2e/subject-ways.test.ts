import { hash } from '@node-rs/argon2';
import { expect, test as base, type Browser, type Page } from '@playwright/test';
import { readFileSync } from 'node:fs';
import { smallPdf } from '../support/files';
import { looked } from '../support/looked';
import { asOwner } from '../support/people';
import { ready, signedIn } from '../support/screens';
import { startServer, type RunningServer } from '../support/server';
import { addSubject, visitScene, type Scene, type SceneSubject } from '../support/visit-scene';
import type { StudyDefinition } from '../../src/lib/domain/study/definition';
import { addDays, plainDateOf, shortDateText, type PlainDate } from '../../src/lib/time/dates';

const password = 'linen warp and weft';
const today = plainDateOf(new Date().toISOString().slice(0, 10));
const yesterday = addDays(today, -1);
const enrolled = addDays(today, -40);

interface Shared {
	server: RunningServer;
	scene: Scene;
	subject: SceneSubject;
}

/** Baseline and two visits later on, counted in days from enrolment; both sites keep the same day. */
const short = (definition: StudyDefinition): StudyDefinition => {
	const kept = ['baseline', 'month-3', 'month-6'];
	const target = { 'month-3': 90, 'month-6': 180 } as Record<string, number>;
	return {
		...definition,
		sites: definition.sites.map((site) => ({ ...site, zone: 'Europe/Berlin' as never })),
		visits: definition.visits
			.filter((visit) => kept.includes(visit.key))
			.map((visit) => ({
				...visit,
				anchor: 'enrolment' as const,
				target: { amount: target[visit.key] ?? 0, unit: 'day' as const }
			})),
		schedule: Object.fromEntries(
			Object.entries(definition.schedule).filter(([key]) => kept.includes(key))
		)
	};
};

const test = base.extend<object, { shared: Shared }>({
	shared: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer();
			const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
			const scene = await visitScene(server.database, { passwordHash, change: short });
			const window = (days: number, before: number, after: number): [string, string, string] => {
				const target = addDays(enrolled, days);
				return [addDays(target, -before), target, addDays(target, after)];
			};
			const subject = await addSubject(server.database, scene, {
				windows: {
					baseline: window(0, 0, 7),
					'month-3': window(90, 14, 14),
					'month-6': window(180, 14, 14)
				},
				email: 'imke.torv@example.org'
			});
			await asOwner(server.database, (client) =>
				client.query('update app.subject set enrolled_on = $2 where id = $1', [
					subject.id,
					enrolled
				])
			);
			await use({ server, scene, subject });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	]
});
test.describe.configure({ mode: 'serial', timeout: 240_000 });
test.use({ actionTimeout: 10_000 });

async function pageOf(browser: Browser, shared: Shared, email: string): Promise<Page> {
	const context = await signedIn(browser, shared.server, { email, password });
	return context.newPage();
}

/** How a window is written: from its first day to its last. */
const windowText = (from: PlainDate, to: PlainDate) =>
	new RegExp(`${shortDateText(from)}.*${shortDateText(to)}`);

test('an amendment is begun, drafted and published with a consent form; nobody follows it before consenting again', async ({
	browser,
	shared
}) => {
	const { scene } = shared;
	const study = `/studies/${scene.studyId}`;
	const page = await pageOf(browser, shared, scene.manager.email);
	await page.goto(`${study}/schedule`);
	await ready(page);
	await page.getByText('Begin an amendment').click();
	await page
		.getByLabel('What it is about')
		.fill('A visit after two months; month 3 has more time.');
	await looked(page, 'begin-amendment');
	await page.getByRole('button', { name: 'Begin', exact: true }).click();
	await expect(page.getByRole('heading', { name: 'Set-up', level: 1 })).toBeVisible();

	const part = async (name: string) => {
		await page.getByRole('navigation', { name: 'Parts of set-up' }).getByText(name).click();
		await expect(page.getByRole('heading', { name, level: 1 })).toBeVisible();
	};
	const keep = async () => {
		await page.getByRole('button', { name: 'Keep', exact: true, disabled: false }).click();
		await expect(page.getByText('not kept')).toHaveCount(0);
		await expect(page.getByText('kept', { exact: true })).toBeVisible();
	};
	await part('Visits');
	await page.getByRole('button', { name: 'Add a visit' }).click();
	const made = page.getByRole('form', { name: 'New visit' });
	await expect(made.getByLabel('Name', { exact: true })).toBeFocused();
	await made.getByLabel('Name', { exact: true }).fill('Month 2');
	await made.getByLabel('Target: how many', { exact: true }).fill('60');
	await made.getByLabel('Target: unit', { exact: true }).selectOption('day');
	await made.getByLabel('Counted from').selectOption('enrolment');
	await keep();
	// It comes before month 3; the check says so until it stands there.
	await expect(page.getByText('1 to mend')).toBeVisible();
	for (let step = 0; step < 2; step++)
		await page.getByRole('button', { name: 'Move Month 2 up' }).click();
	await expect(page.getByText('1 to mend')).toHaveCount(0);
	await page.getByRole('link', { name: 'Month 3', exact: true }).click();
	const moved = page.getByRole('form', { name: 'Month 3' });
	await moved.getByLabel('Window after the target: how many').fill('28');
	await keep();
	await looked(page, 'amended-visits');

	await part('Schedule of activities');
	const grid = page.getByRole('grid');
	const column = await grid.getByRole('columnheader').allInnerTexts();
	const at = column.findIndex((text) => text.includes('Month 2'));
	expect(at).toBeGreaterThan(0);
	await grid.getByRole('row').nth(1).getByRole('gridcell').nth(at).click();
	await expect(page.getByText('kept', { exact: true })).toBeVisible();
	await looked(page, 'amended-grid');

	await part('Eligibility and consent');
	await page.getByRole('button', { name: 'Add a consent version' }).click();
	await page.getByLabel('Approved on').fill(yesterday);
	await keep();
	await looked(page, 'amended-consent');

	await page.getByRole('link', { name: 'Overview' }).click();
	await expect(page.getByText('The amendment brings a new consent form.')).toBeVisible();
	await page.getByLabel('Approved by the ethics committee on').fill(yesterday);
	await page.getByLabel('Are people asked again?').selectOption('yes');
	await page.getByLabel(/^(Asked|To be asked) by/).fill(addDays(today, 20));
	await looked(page, 'publish-amendment');
	await page.getByRole('button', { name: 'Publish version 2' }).click();
	await expect(page.getByText('Published. Nobody follows it yet.')).toBeVisible();
	await looked(page, 'amendment-published');
});

test('the coordinator finds who is to be asked again, records the consent, and files the signed form', async ({
	browser,
	shared
}) => {
	const { scene, subject } = shared;
	const study = `/studies/${scene.studyId}`;
	const page = await pageOf(browser, shared, scene.sites[0].coordinator.email);
	await page.goto(`${study}/subjects/${subject.id}`);
	await ready(page);
	const ahead = page.getByRole('table', { name: 'Visits that are not done yet' });
	const visit = (name: string) => ahead.getByRole('row', { name: new RegExp(`^${name} `) });
	const month3 = addDays(enrolled, 90);
	await expect(visit('Month 3')).toContainText(
		windowText(addDays(month3, -14), addDays(month3, 14))
	);
	await expect(visit('Month 2')).toHaveCount(0);

	await page.goto(`${study}/consent`);
	await ready(page);
	await expect(page.getByText('One person has to be asked again.')).toBeVisible();
	await looked(page, 'reconsent-worklist');
	await page.getByRole('link', { name: subject.number }).click();
	const consent = page.locator('#asked-again');
	await expect(consent.getByText('version 2 is in force')).toBeVisible();
	await looked(page, 'record-to-ask');
	await expect(consent.getByLabel('Version signed').locator('option').first()).toContainText('2.0');
	await consent.getByLabel('Signed by').selectOption('participant');
	await consent.getByLabel(/^at \(/).fill('00:00');
	await consent.getByLabel('A copy of what was signed was given').check();
	await consent.getByRole('button', { name: 'Record the consent' }).click();
	await expect(
		page.getByText('The consent is recorded; protocol version 2 applies.')
	).toBeVisible();
	await expect(visit('Month 2')).toContainText(
		windowText(addDays(enrolled, 53), addDays(enrolled, 67))
	);
	await expect(visit('Month 3')).toContainText(
		windowText(addDays(month3, -14), addDays(month3, 28))
	);
	await looked(page, 'record-asked');
	await page.goto(`${study}/consent`);
	await ready(page);
	await expect(page.getByText('Nobody has to be asked again.')).toBeVisible();
	await looked(page, 'reconsent-nobody');

	await page.goto(`${study}/subjects/${subject.id}`);
	await ready(page);
	await page.getByRole('link', { name: 'Add the signed scan of consent version 2.0' }).click();
	await expect(page.getByRole('heading', { name: 'Signed form', level: 1 })).toBeVisible();
	await looked(page, 'scan-none');
	await page.getByLabel('Scan of the signed form').setInputFiles({
		name: 'form.pdf',
		mimeType: 'application/pdf',
		buffer: smallPdf
	});
	await page.getByRole('button', { name: 'Send the scan' }).click();
	await expect(page.getByRole('heading', { name: 'Replace the scan' })).toBeVisible();
	await looked(page, 'scan-sent');
	await page.getByRole('link', { name: 'Back' }).click();
	const [download] = await Promise.all([
		page.waitForEvent('download'),
		page.getByRole('link', { name: /^Signed form, PDF/ }).click()
	]);
	expect(readFileSync(await download.path()).equals(smallPdf)).toBe(true);
	// The file is not called after the person or what was sent.
	expect(download.suggestedFilename()).not.toContain('form.pdf');
});

test('a subject moves to the other site, leaves with what that does said before, and comes back', async ({
	browser,
	shared
}) => {
	const { scene, subject } = shared;
	const record = `/studies/${scene.studyId}/subjects/${subject.id}`;
	const there = await pageOf(browser, shared, scene.sites[1].coordinator.email);
	await there.goto(record);
	await expect(there.getByText(subject.number)).toHaveCount(0);

	const here = await pageOf(browser, shared, scene.sites[0].coordinator.email);
	await here.goto(record);
	await ready(here);
	await here.getByText('Move the subject to another site').click();
	await here.getByLabel('To', { exact: true }).selectOption({ label: '02 Second site' });
	const moving = here.locator('section', { hasText: 'Another site' }).last();
	await moving.getByLabel('Reason').fill('Moved to the coast.');
	await expect(moving.getByText('3 visits to come go to the new site.')).toBeVisible();
	await looked(here, 'moving');
	await moving.getByRole('button', { name: 'Move', exact: true }).click();
	await expect(here.getByText(/^moved/).first()).toBeVisible();
	await expect(here.getByText('to Second site on')).toBeVisible();
	await looked(here, 'moved-away');

	await there.goto(record);
	await ready(there);
	await expect(
		there.getByRole('heading', { name: `Thread ${subject.number}`, level: 1 })
	).toBeVisible();
	const ahead = there.getByRole('table', { name: 'Visits that are not done yet' });
	await expect(ahead.getByRole('row', { name: /^Month 2 / })).toBeVisible();

	const leaving = there.locator('section', { hasText: 'Leaving the study' }).last();
	await there.getByText('Record how somebody leaves, or stops the treatment').click();
	await leaving.getByRole('radio', { name: /^consent withdrawn/ }).check();
	await expect(leaving.getByText('This will happen')).toBeVisible();
	await expect(
		leaving.getByText('3 visits to come become not required.', { exact: true })
	).toBeVisible();
	await expect(
		leaving.getByText('Nothing more can be entered about this subject.', { exact: true })
	).toBeVisible();
	await looked(there, 'leaving');
	await leaving.getByRole('button', { name: 'Record', exact: true }).click();
	await expect(there.getByText('Recorded. 3 visits are not required any more.')).toBeVisible();
	await expect(ahead.getByRole('row', { name: /^Month 2 / })).toHaveCount(0);
	await looked(there, 'left');

	const back = there.locator('section', { hasText: 'Recorded as left' }).last();
	await back.getByText('Take it back').click();
	await back.getByLabel('Because').selectOption('entered by mistake');
	await back.getByLabel('Reason').fill('It was another subject.');
	await looked(there, 'taking-back');
	await back.getByRole('button', { name: 'Take back' }).click();
	await expect(there.getByText('Taken back. 3 visits are to come again')).toBeVisible();
	await expect(ahead.getByRole('row', { name: /^Month 2 / })).toBeVisible();
	await looked(there, 'came-back');
});
