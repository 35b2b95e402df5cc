import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test as base, type Page } from '@playwright/test';
import type { Role } from '../../src/lib/domain/person/roles';
import { readKitNumber } from '../../src/lib/domain/randomisation/kit';
import { readSubjectNumber } from '../../src/lib/domain/subject/number';
import { addPerson, addRole } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';

interface Shared {
	server: RunningServer;
	/** A person with a role; without a study it holds everywhere. */
	person(role: Role, studyId?: string | null, siteId?: string | null): Promise<string>;
	/** What the earlier errands made. */
	made: { studyId: string; siteId: string; coordinator: string };
}

const test = base.extend<object, { shared: Shared }>({
	shared: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer({ lookWorker: true });
			const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
			let n = 0;
			const person: Shared['person'] = async (role, studyId = null, siteId = null) => {
				const email = `${role.replaceAll('_', '-')}-${++n}@example.org`;
				const id = await addPerson(server.database, { email, name: `Person ${n}`, passwordHash });
				await addRole(server.database, id, role, studyId, siteId);
				return email;
			};
			await use({ server, person, made: { studyId: '', siteId: '', coordinator: '' } });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	],
	baseURL: async ({ shared }, use) => use(shared.server.origin)
});
test.describe.configure({ mode: 'serial', timeout: 180_000 });

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

/** Goes on with the tab key until the wanted thing has the focus. */
async function tabTo(page: Page, wanted: ReturnType<Page['getByRole']>) {
	for (let presses = 0; presses < 80; presses++) {
		if (await wanted.evaluate((element) => element === document.activeElement)) return;
		await page.keyboard.press('Tab');
	}
	throw new Error('The tab key does not lead there.');
}

const fitsTheWidth = (page: Page) =>
	page.evaluate(() => document.documentElement.scrollWidth <= document.documentElement.clientWidth);

test('a data manager makes a study from a template, changes a window, and publishes it', async ({
	page,
	shared
}) => {
	await signIn(page, await shared.person('data_manager'));
	await page.goto('/');
	await ready(page);
	await page.getByRole('link', { name: 'New study' }).click();
	await expect(page.getByRole('heading', { name: 'New study' })).toBeVisible();
	await axe(page);

	await page.getByLabel('Study code').fill('AMR-01');
	await page.getByLabel('Name', { exact: true }).fill('Aldermere');
	await page.getByLabel('Consent form approved on').fill('2026-01-05');
	await page.getByLabel('Site 1', { exact: true }).fill('Northmoor');
	await page.getByLabel('Time zone of site 1').fill('Europe/Nowhere');
	await page.getByLabel('Site 2', { exact: true }).fill('');
	await page.getByRole('button', { name: 'Make the draft' }).click();
	await expect(page.getByText('Give a time zone by its name')).toBeVisible();
	await expect(page.getByLabel('Study code')).toHaveValue('AMR-01');
	await page.getByLabel('Time zone of site 1').fill('Europe/London');
	await page.getByRole('button', { name: 'Make the draft' }).click();

	await expect(page.getByRole('heading', { name: 'Set-up' })).toBeVisible();
	await axe(page);
	await page.getByRole('link', { name: 'Read it as a whole' }).click();
	await expect(page.getByText('Two arms, allocated by chance in equal parts')).toBeVisible();
	await expect(page.getByRole('row', { name: /^Month 24/ })).toContainText(
		'24 months after randomisation'
	);
	await axe(page);
	await page.getByRole('link', { name: 'Change', exact: true }).click();

	// A window that overlaps its neighbour's stops publishing; the finding leads to its field.
	await page.getByRole('link', { name: 'Visits', exact: true }).click();
	await page.getByRole('link', { name: 'Month 1', exact: true }).click();
	const before = page.getByLabel('Window before the target: how many');
	await before.fill('25');
	await page.getByRole('button', { name: 'Keep' }).click();
	await expect(page.getByRole('button', { name: 'Keep' })).toBeDisabled();
	await page.getByRole('link', { name: 'Overview' }).click();
	await expect(
		page.getByText(/The windows of “Week 2” and “Month 1” overlap/).first()
	).toBeVisible();
	await expect(page.getByRole('button', { name: 'Publish version 1' })).toBeDisabled();
	await page.getByRole('link', { name: /^Go there ?: The windows of “Week 2”/ }).click();
	await expect(before).toBeFocused();
	await before.fill('7');
	await page.keyboard.press('Enter');
	await expect(page.getByRole('button', { name: 'Keep' })).toBeDisabled();
	await page.getByRole('link', { name: 'Overview' }).click();
	await expect(page.getByText('Nothing found.')).toBeVisible();

	const publish = page.getByRole('button', { name: 'Publish version 1' });
	await tabTo(page, publish);
	await page.keyboard.press('Enter');
	await expect(page.getByText('Published. The study is open.')).toBeVisible();
	await expect(publish).toHaveCount(0);
	await axe(page);
	await page.setViewportSize({ width: 820, height: 1100 });
	expect(await fitsTheWidth(page)).toBe(true);

	shared.made.studyId = new URL(page.url()).pathname.split('/')[2] ?? '';
	const [sites] = await shared.server.database.sql(
		`select id from app.site where study_id = '${shared.made.studyId}'`
	);
	expect(sites).toHaveLength(1);
	shared.made.siteId = sites?.[0]?.id;

	await page.setViewportSize({ width: 1280, height: 800 });
	await page.getByRole('link', { name: 'Sites', exact: true }).click();
	await expect(page.getByText('not approved yet')).toBeVisible();
	await page.getByLabel('Ethics approval of the site').fill('2026-01-06');
	await page.getByRole('button', { name: 'Record the approval' }).click();
	await expect(page.getByText('approved 6 Jan 2026')).toBeVisible();
	await page.getByLabel('First day').fill('2026-12-24');
	await page.getByLabel('Last day').fill('2026-12-20');
	await page.getByLabel('Reason').fill('Winter break');
	await page.getByRole('button', { name: 'Close on these days' }).click();
	await expect(page.getByText('Choose the first day or a later one.')).toBeVisible();
	await page.getByLabel('Last day').fill('2026-12-31');
	await page.getByRole('button', { name: 'Close on these days' }).click();
	await expect(page.getByText('24 Dec 2026 to 31 Dec 2026')).toBeVisible();
	await axe(page);
	await page.getByRole('button', { name: 'Open again: Northmoor' }).click();
	await expect(page.getByText('On no day besides the opening hours.')).toBeVisible();
});

test('the independent statistician has the list made by the look worker, once', async ({
	page,
	shared
}) => {
	const { studyId } = shared.made;
	await signIn(page, await shared.person('independent_statistician', studyId));
	await page.goto(`/studies/${studyId}/allocation`);
	await ready(page);
	await axe(page);
	await page.getByRole('button', { name: 'Make the list' }).click();
	await expect(page.getByRole('heading', { name: 'The list is made' })).toBeVisible({
		timeout: 30_000
	});
	await expect(page.getByRole('definition').filter({ hasText: /^[0-9a-f]{64}$/ })).toBeVisible();
	await expect(page.getByRole('button', { name: 'Make the list' })).toHaveCount(0);
	await axe(page);
});

test('a coordinator screens, takes consent, enrols and randomises, mostly by keyboard', async ({
	browser,
	page,
	shared
}) => {
	const { studyId, siteId } = shared.made;
	shared.made.coordinator = await shared.person('coordinator', studyId, siteId);
	await signIn(page, shared.made.coordinator);
	await page.goto(`/studies/${studyId}/screening`);
	await ready(page);
	await expect(page.getByText('Nobody was considered yet')).toBeVisible();
	await axe(page);
	await tabTo(page, page.getByRole('button', { name: 'Add to the log' }));
	await page.keyboard.press('Enter');
	await expect(page.getByRole('heading', { name: 'Screening 01/1' })).toBeVisible();
	await expect(page.getByText('Still needed: a recorded consent and an answer')).toBeVisible();
	await axe(page);

	// Each missing part stops the consent.
	await page.getByRole('button', { name: 'Record the consent' }).click();
	await expect(page.getByText('Say who signed.')).toBeVisible();
	await expect(page.getByText('Give a copy of what was signed')).toBeVisible();
	await page.getByLabel('Signed by').selectOption('participant');
	await page.getByLabel('Signed on').fill('2026-01-04');
	await page.getByLabel('A copy of what was signed was given').check();
	await page.getByRole('button', { name: 'Record the consent' }).click();
	await expect(page.getByText('This version was not approved yet.')).toBeVisible();
	for (const group of await page.getByRole('group').filter({ hasText: 'inclusion:' }).all())
		await group.getByLabel('yes').check();
	for (const group of await page.getByRole('group').filter({ hasText: 'exclusion:' }).all())
		await group.getByLabel('no').check();
	await page.getByLabel('Why', { exact: true }).fill('Not decided');
	const today = await page.getByLabel('Signed on').getAttribute('max');
	await page.getByLabel('Signed on').fill(today ?? '');
	await page.getByLabel(/^at \(/).fill('00:00');
	await page.getByRole('button', { name: 'Record the consent' }).click();
	await expect(page.getByText('explained by Person')).toBeVisible();

	// What was filled in elsewhere on the page outlasts the sending of another form.
	await expect(page.getByRole('radio', { checked: true })).toHaveCount(5);
	await expect(page.getByLabel('Why', { exact: true })).toHaveValue('Not decided');
	await page.getByLabel('Why', { exact: true }).fill('');
	await page.getByRole('button', { name: 'Keep the answers' }).click();
	await expect(page.getByText('The answers are kept.')).toBeVisible();
	await expect(page.getByText('met', { exact: true })).toHaveCount(5);
	await axe(page);

	await expect(page.getByText('Still needed: the investigator’s signature.')).toBeVisible();
	const doctor = await browser.newPage({ baseURL: shared.server.origin });
	const investigator = await shared.person('investigator', studyId, siteId);
	await signIn(doctor, investigator);
	await doctor.goto(`/studies/${studyId}/signing`);
	await ready(doctor);
	await doctor.getByRole('checkbox').check();
	await doctor.getByLabel('Your e-mail address').fill(investigator);
	await doctor.getByLabel('Your password').fill(password);
	await doctor.getByRole('button', { name: 'Sign', exact: true }).click();
	await expect(doctor.getByRole('checkbox')).toHaveCount(0);
	await doctor.close();
	await page.reload();
	await ready(page);

	await page.getByLabel('Kidney function at screening').selectOption('below-45');
	await page.getByLabel('Sex').selectOption('female');
	await page.getByRole('button', { name: 'Enrol', exact: true }).click();
	await expect(page.getByText('This is needed.')).toBeVisible();
	await page.getByLabel('Date of birth').fill('1961-04-30');
	await page.getByLabel('Name', { exact: true }).fill('Ada Reed');
	await tabTo(page, page.getByRole('button', { name: 'Enrol', exact: true }));
	await page.keyboard.press('Enter');

	const heading = page.getByRole('heading', { name: /^Thread \d\d-\d{4}-\d$/ });
	await expect(heading).toBeVisible();
	expect(readSubjectNumber((await heading.innerText()).slice('Thread '.length)).ok).toBe(true);
	await axe(page);

	await tabTo(page, page.getByRole('button', { name: 'Randomise' }));
	await page.keyboard.press('Enter');
	const said = page.getByText(/^Randomised\. Give kit /);
	await expect(said).toBeVisible();
	expect(readKitNumber((await said.innerText()).replace(/^.*kit /, '').replace(/\.$/, '')).ok).toBe(
		true
	);
	await expect(page.getByRole('button', { name: 'Randomise' })).toHaveCount(0);
	await expect(page.getByRole('rowheader', { name: 'Month 24' })).toBeVisible();
	expect(await page.content()).not.toContain('Treatment A');
	await axe(page);

	// Leaving ends the visits to come.
	await page.getByText('Record how somebody leaves').click();
	await page.getByRole('button', { name: 'Record', exact: true }).click();
	await expect(page.getByText('Choose what happened.')).toBeVisible();
	await page.getByRole('radio', { name: /^stopped visits/ }).check();
	await page.getByRole('button', { name: 'Record', exact: true }).click();
	await expect(page.getByText('9 visits are not required any more.')).toBeVisible();
	await axe(page);
});

test('threads are found by site and number, described in words, and shown as a table', async ({
	page,
	shared
}) => {
	const { studyId } = shared.made;
	await signIn(page, shared.made.coordinator);
	await page.goto(`/studies/${studyId}/subjects`);
	await ready(page);
	await expect(
		page.getByRole('img', { name: /^01-0001-\d: .*Month 24 not required; stopped visits\.$/ })
	).toBeVisible();
	await axe(page);
	await page.getByRole('link', { name: 'Table', exact: true }).click();
	await expect(page.getByRole('row', { name: /01-0001/ })).toContainText('stopped visits');
	await axe(page);
	await page.getByLabel('Subject number').fill('77');
	await page.getByLabel('Subject number').press('Enter');
	await expect(page.getByText('No subject fits')).toBeVisible();
	await expect(page).toHaveURL(/search=77/);
	await page.setViewportSize({ width: 820, height: 1100 });
	await page.goto(`/studies/${studyId}/subjects`);
	expect(await fitsTheWidth(page)).toBe(true);
});

test('the screening log and enrolment work without JavaScript', async ({ browser, shared }) => {
	const { studyId } = shared.made;
	const context = await browser.newContext({ javaScriptEnabled: false });
	const page = await context.newPage();
	await page.goto(`${shared.server.origin}/sign-in`);
	await page.getByLabel('E-mail address').fill(shared.made.coordinator);
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.goto(`${shared.server.origin}/studies/${studyId}/screening`);
	await page.getByRole('button', { name: 'Add to the log' }).click();
	await page.getByLabel('Why').fill('Lives too far away.');
	await page.getByRole('button', { name: 'Close as not entered' }).click();
	await expect(page.getByText('not entered Lives too far away.')).toBeVisible();
	await context.close();
});
