import AxeBuilder from '@axe-core/playwright';
import { hash } from '@node-rs/argon2';
import { expect, test as base, type Page } from '@playwright/test';
import ICAL from 'ical.js';
import { addDays, isoWeekday, plainDateOf, type PlainDate } from '../../src/lib/time/dates';
import { dateInZone } from '../../src/lib/time/zones';
import { withTellingMeasure } from '../support/telling';
import { startServer, type CaughtMail, type RunningServer } from '../support/server';
import {
	addActor,
	addSubject,
	visitScene,
	type Person,
	type Scene,
	type SceneSubject
} from '../support/visit-scene';

const password = 'linen warp and weft';

interface Shared {
	server: RunningServer;
	scene: Scene;
	pharmacist: Person;
	/** Due now, with an address; closing; passed. */
	due: SceneSubject;
	late: SceneSubject;
}

/** A database and a server of its own: the errand changes what it finds. */
const test = base.extend<object, { shared: Shared }>({
	shared: [
		// eslint-disable-next-line no-empty-pattern
		async ({}, use) => {
			const server = await startServer({ worker: true });
			const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
			const scene = await visitScene(server.database, {
				passwordHash,
				change: withTellingMeasure
			});
			const pharmacist = await addActor(
				server.database,
				'Jorin Vask',
				'pharmacist',
				scene.studyId,
				scene.sites[0].id,
				passwordHash
			);
			const today = dateInZone(new Date(), scene.sites[0].zone);
			const from = (before: number, after: number): [PlainDate, PlainDate, PlainDate] => [
				addDays(today, -before),
				today,
				addDays(today, after)
			];
			const due = await addSubject(server.database, scene, {
				email: 'wanda@example.org',
				windows: { 'month-6': from(7, 9) }
			});
			const late = await addSubject(server.database, scene, {
				windows: { 'month-9': [addDays(today, -20), addDays(today, -12), addDays(today, -4)] }
			});
			await use({ server, scene, pharmacist, due, late });
			await server.stop();
		},
		{ scope: 'worker', timeout: 240_000 }
	],
	baseURL: async ({ shared }, use) => use(shared.server.origin)
});
test.describe.configure({ mode: 'serial' });

async function signIn(page: Page, email: string) {
	await page.goto('/sign-in');
	await page.waitForLoadState('networkidle');
	await page.getByLabel('E-mail address').fill(email);
	await page.getByLabel('Password', { exact: true }).fill(password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.waitForURL((url) => !url.pathname.startsWith('/sign-in'));
	await page.waitForLoadState('networkidle');
}

async function axe(page: Page) {
	const { violations } = await new AxeBuilder({ page }).analyze();
	expect(
		violations.map((each) => `${each.id}: ${each.nodes.map((node) => node.html).join(' ')}`)
	).toEqual([]);
}

/** The next day the template's sites are open, inside the window. */
const openDay = (scene: Scene): PlainDate => {
	let day = addDays(dateInZone(new Date(), scene.sites[0].zone), 1);
	while (isoWeekday(day) > 5) day = addDays(day, 1);
	return plainDateOf(day);
};

test('a coordinator finds a window, books it, moves it and cancels it, and the calendar mails follow', async ({
	page,
	shared
}) => {
	const { scene, server, due } = shared;
	const errors: string[] = [];
	page.on('pageerror', (error) => errors.push(error.message));
	await signIn(page, scene.sites[0].coordinator.email);
	await expect(page.getByRole('heading', { name: 'Windows, soonest to close' })).toBeVisible();
	await axe(page);
	await page.getByRole('link', { name: 'Windows', exact: true }).click();
	await expect(page.getByRole('row', { name: new RegExp(due.number) })).toContainText(
		'9 days left'
	);
	await axe(page);
	await page.getByLabel('Subject or visit').fill(due.number);
	await page.getByLabel('Subject or visit').press('Enter');
	await expect(page).toHaveURL(/text=/);
	await page.getByRole('link', { name: `Book ${due.number} Month 6` }).click();
	await page.waitForLoadState('networkidle');
	await axe(page);

	const day = openDay(scene);
	await page.getByLabel('Day').fill(day);
	await page.getByLabel('Taken by').selectOption({ label: scene.sites[0].nurse.name });
	await page.getByRole('button', { name: '09:00' }).click();
	await page.getByRole('button', { name: 'Book the visit' }).click();
	await expect(page.getByText('The visit is booked.')).toBeVisible();

	const mail = await server.mailTo('wanda@example.org');
	const event = eventOf(mail);
	expect(event.method).toBe('REQUEST');
	expect(event.sequence).toBe(0);
	expect(dateInZone(new Date(event.start), scene.sites[0].zone)).toBe(day);
	expect(event.summary).toBe('Study visit');

	await page.getByRole('button', { name: '10:00' }).click();
	await page.getByRole('button', { name: 'Move the visit' }).click();
	await expect(page.getByText('The visit has a new time.')).toBeVisible();
	const moved = eventOf(
		await server.mailTo('wanda@example.org', (each) => eventOf(each).sequence === 1)
	);
	expect(moved.uid).toBe(event.uid);

	await page.getByText('Cancel this appointment').click();
	await page.getByLabel('Reason', { exact: true }).fill('Away that week');
	await page.getByRole('button', { name: 'Cancel the appointment' }).click();
	await expect(page.getByText('The appointment is cancelled.')).toBeVisible();
	const cancelled = eventOf(
		await server.mailTo('wanda@example.org', (each) => eventOf(each).sequence === 2)
	);
	expect(cancelled).toMatchObject({ method: 'CANCEL', uid: event.uid, status: 'CANCELLED' });
	expect(errors).toEqual([]);
});

interface CaughtEvent {
	method: string;
	uid: string;
	sequence: number;
	start: string;
	status: string;
	summary: string;
}
function eventOf(mail: CaughtMail): CaughtEvent {
	const part = mail.attachments.find((each) => each.type.startsWith('text/calendar'));
	const text = Buffer.from(part?.content ?? '', 'base64').toString('utf8');
	const calendar = new ICAL.Component(ICAL.parse(text));
	const event = calendar.getFirstSubcomponent('vevent') as ICAL.Component;
	const value = (name: string) => event.getFirstPropertyValue(name);
	return {
		method: String(calendar.getFirstPropertyValue('method')),
		uid: String(value('uid')),
		sequence: Number(value('sequence')),
		start: String(value('dtstart')),
		status: String(value('status')),
		summary: String(value('summary'))
	};
}

test('a room that is taken is refused with a sentence, and what was typed stays', async ({
	page,
	shared
}) => {
	const { scene, server, due } = shared;
	const other = await addSubject(server.database, scene, {
		windows: {
			'month-6': [addDays(openDay(scene), -5), openDay(scene), addDays(openDay(scene), 5)]
		}
	});
	await signIn(page, scene.sites[0].coordinator.email);
	const bookAt = async (visitId: string | undefined) => {
		await page.goto(`/studies/${scene.studyId}/visits/${visitId}/book?date=${openDay(scene)}`);
		await page.waitForLoadState('networkidle');
		await page.getByLabel('Taken by').selectOption({ label: scene.sites[0].nurse.name });
		await page.getByLabel('Time', { exact: true }).fill('11:00');
		await page.getByRole('button', { name: 'Book the visit' }).click();
	};
	await bookAt(due.visits['month-6']);
	await expect(page.getByText('The visit is booked.')).toBeVisible();
	await bookAt(other.visits['month-6']);
	await expect(page.getByText('That room is taken at this time.').first()).toBeVisible();
	await expect(page.getByLabel('Time', { exact: true })).toHaveValue('11:00');
	await axe(page);
});

test('the calendar address is made, serves neutral events, and is gone once revoked', async ({
	page,
	shared
}) => {
	const { scene, server, due } = shared;
	await signIn(page, scene.sites[0].nurse.email);
	await page.goto(`/studies/${scene.studyId}/windows`);
	await page.waitForLoadState('networkidle');
	await page.getByRole('button', { name: 'Make an address' }).click();
	const address = await page.getByLabel('Address').inputValue();
	const first = await server.fetch(new URL(address).pathname);
	expect(first.status).toBe(200);
	expect(first.headers.get('content-type')).toBe('text/calendar; charset=utf-8');
	expect(first.headers.get('cache-control')).toBe('no-store');
	const text = await first.text();
	expect(text).toContain('SUMMARY:Study visit');
	expect(text).not.toContain(due.number);
	const again = await server.fetch(new URL(address).pathname, {
		headers: { 'if-none-match': first.headers.get('etag') ?? '' }
	});
	expect(again.status).toBe(304);
	await axe(page);
	await page.getByRole('button', { name: 'Revoke the address' }).click();
	await expect(page.getByText('The address is revoked.')).toBeVisible();
	expect((await server.fetch(new URL(address).pathname)).status).toBe(404);
	expect(server.logs()).not.toContain(new URL(address).pathname);
});

test.describe('on the tablet', () => {
	test.use({ viewport: { width: 820, height: 1180 }, hasTouch: true });

	test('a nurse takes the measurements by keyboard and touch, and finishes the visit', async ({
		page,
		shared
	}) => {
		const { scene, server, due } = shared;
		const errors: string[] = [];
		page.on('pageerror', (error) => errors.push(error.message));
		await signIn(page, scene.sites[0].nurse.email);
		await expect(page.getByRole('heading', { name: /^Today/ })).toBeVisible();
		await axe(page);
		await page.goto(`/studies/${scene.studyId}/visits/${due.visits['month-6']}`);
		await page.waitForLoadState('networkidle');
		await axe(page);
		await page.getByRole('button', { name: 'Start the visit' }).tap();
		await expect(page.getByText('All entered values are kept')).toBeVisible();
		await page.waitForLoadState('networkidle');
		const card = (name: string) => page.locator(`[data-measure="${name}"]`);
		const kept = (name: string) =>
			expect(card(name).locator('[data-state]')).toHaveText('kept', { timeout: 15_000 });

		// An impossible value is refused at once, an unusual one is asked about.
		const creatinine = page.getByLabel('Serum creatinine, micromoles per litre');
		await creatinine.fill('15000');
		await creatinine.press('Enter');
		await expect(card('creatinine')).toContainText('is outside what this study accepts');
		await creatinine.fill('320');
		await creatinine.press('Enter');
		await expect(card('creatinine')).toContainText('possible, but unusual');
		await axe(page);
		await card('creatinine').getByRole('button', { name: 'Measured again: keep 320' }).tap();
		await kept('creatinine');
		await expect(page.getByText('mL/min/1.73 m²').first()).toBeVisible();

		for (const [name, readings] of [
			['systolic', ['132', '128', '130']],
			['diastolic', ['82', '80', '81']]
		] as const) {
			const fields = card(name).locator('input[data-entry]');
			await fields.first().focus();
			for (const reading of readings) {
				await page.keyboard.type(reading);
				await page.keyboard.press('Enter');
			}
			await kept(name);
		}
		await expect(card('systolic')).toContainText('mean 130.0 mmHg');

		// In another unit: both stay.
		await card('weight').getByLabel('Unit of Weight').selectOption({ label: 'lb' });
		await card('weight').locator('input[data-entry]').fill('150');
		await expect(card('weight')).toContainText('is 68.0 kg');
		await page.keyboard.press('Enter');
		await kept('weight');

		// Not everything is there yet.
		await page.getByRole('button', { name: 'Finish visit' }).tap();
		await expect(page.getByText('Still open: Potassium')).toBeVisible();
		await card('potassium').getByRole('button', { name: 'Not done…' }).tap();
		await card('potassium').getByLabel('Why it was not done').selectOption('Sample not usable');
		await kept('potassium');

		// A kept value changes only with a reason.
		await card('weight').locator('input[data-entry]').fill('151');
		await page.keyboard.press('Enter');
		await card('weight').getByLabel('Why does the kept value change?').fill('Misread');
		await card('weight').getByRole('button', { name: 'Keep the change' }).tap();
		await kept('weight');
		await axe(page);

		await page.getByRole('button', { name: 'Finish visit' }).tap();
		await expect(page.getByText('The visit is finished')).toBeVisible();
		await axe(page);
		await page.getByRole('link', { name: 'History of Weight' }).tap();
		await expect(page.getByRole('table', { name: /Every state of Weight/ })).toContainText(
			'Misread'
		);
		await axe(page);
		const [rows] = await server.database.sql(
			`select m.key, n.value, n.entered_value, n.not_done_reason from app.measurement n join app.measure m on m.id = n.measure_id
			where n.visit_id = '${due.visits['month-6']}' order by m.position`
		);
		expect(rows?.map((row) => row.key)).toEqual([
			'creatinine',
			'egfr',
			'systolic',
			'diastolic',
			'weight',
			'potassium'
		]);
		expect(errors).toEqual([]);
	});

	test('the pharmacist enters what could reveal the arm; the nurse’s page says nothing of it', async ({
		page,
		browser,
		shared
	}) => {
		const { scene, server, due, pharmacist } = shared;
		const visit = `/studies/${scene.studyId}/visits/${due.visits['month-6']}`;
		await signIn(page, pharmacist.email);
		await page.goto(`/studies/${scene.studyId}`);
		await axe(page);
		await page
			.getByRole('link', { name: /· Month 6$/ })
			.first()
			.tap();
		await page.waitForLoadState('networkidle');
		await expect(page.getByRole('button', { name: 'Finish visit' })).toHaveCount(0);
		const card = page.locator('[data-measure="urine-glucose"]');
		await card.locator('input[data-entry]').fill('13.37');
		await page.keyboard.press('Enter');
		await expect(card.locator('[data-state]')).toHaveText('kept', { timeout: 15_000 });
		await expect(page.getByRole('row', { name: /Weight/ })).toBeVisible();
		await axe(page);
		await page.goto(`/studies/${scene.studyId}`);
		await expect(page.getByText('Nothing waits', { exact: true })).toBeVisible();

		const other = await browser.newPage({ baseURL: server.origin });
		await signIn(other, scene.sites[0].nurse.email);
		for (const place of [visit, `/studies/${scene.studyId}/subjects/${due.id}`]) {
			await other.goto(place);
			expect(await other.content()).not.toMatch(/13\.37/);
		}
		await other.goto(visit);
		expect(await other.content()).not.toContain('Urine glucose');
		await other.close();
	});

	test('a value typed while the network is away stays in its field and is sent when it is back', async ({
		page,
		context,
		shared
	}) => {
		const { scene, server } = shared;
		const today = dateInZone(new Date(), scene.sites[0].zone);
		const subject = await addSubject(server.database, scene, {
			windows: { 'month-6': [addDays(today, -3), today, addDays(today, 3)] }
		});
		await signIn(page, scene.sites[0].nurse.email);
		await page.goto(`/studies/${scene.studyId}/visits/${subject.visits['month-6']}`);
		await page.waitForLoadState('networkidle');
		await page.getByRole('button', { name: 'Start the visit' }).tap();
		await expect(page.getByText('All entered values are kept')).toBeVisible();
		await page.waitForLoadState('networkidle');
		await context.setOffline(true);
		const potassium = page.locator('[data-measure="potassium"]');
		await potassium.locator('input[data-entry]').fill('4.6');
		await page.keyboard.press('Enter');
		await expect(page.getByText('No network · 1 value waits')).toBeVisible();
		await expect(potassium.locator('input[data-entry]')).toHaveValue('4.6');
		await context.setOffline(false);
		await expect(potassium.locator('[data-state]')).toHaveText('kept', { timeout: 20_000 });
		const [rows] = await server.database.sql(
			`select value::float as value from app.measurement where visit_id = '${subject.visits['month-6']}'`
		);
		expect(rows).toEqual([{ value: 4.6 }]);
	});
});

test('a passed window is chased, and declared missed with a reason', async ({ page, shared }) => {
	const { scene, server, late } = shared;
	await signIn(page, scene.sites[0].coordinator.email);
	await page.goto(`/studies/${scene.studyId}/chase`);
	await page.waitForLoadState('networkidle');
	await expect(page.getByRole('row', { name: new RegExp(late.number) })).toContainText(
		'passed 4 days ago'
	);
	await axe(page);
	await page.getByRole('link', { name: `Log contact for ${late.number} Month 9` }).click();
	await page.waitForLoadState('networkidle');
	await page.getByLabel('What came of it').selectOption('no answer');
	await page.getByLabel('Next step').fill('Call again in the evening');
	await page.getByRole('button', { name: 'Keep the contact' }).click();
	await expect(page.getByText('The contact is kept.')).toBeVisible();
	await expect(page.getByText('telephone: no answer')).toBeVisible();
	await axe(page);
	await page.getByLabel('Reason').fill('Could not be reached');
	await page.getByRole('button', { name: 'Declare missed' }).click();
	await expect(page.getByText('The visit is declared missed')).toBeVisible();
	const [visits, deviations] = await server.database.sql(
		`select status from app.visit where id = '${late.visits['month-9']}'`,
		`select category from app.deviation where visit_id = '${late.visits['month-9']}'`
	);
	expect(visits).toEqual([{ status: 'missed' }]);
	expect(deviations).toEqual([{ category: 'missed visit' }]);
});

test('each role finds its own day', async ({ page, shared }) => {
	const { scene, server } = shared;
	const passwordHash = await hash(password, { memoryCost: 19456, timeCost: 2, parallelism: 1 });
	for (const [name, role, words] of [
		['Mona Reed', 'monitor', 'How the sites stand'],
		['Aud Itor', 'auditor', 'Audit trail'],
		['Stan Mask', 'statistician', 'Data cuts'],
		['Inga Free', 'independent_statistician', 'Board room'],
		['Bo Ard', 'board_member', 'Board room'],
		['Ivo Tegen', 'investigator', 'Screening log']
	] as const) {
		const site = role === 'investigator' || role === 'monitor' ? scene.sites[0].id : null;
		const person = await addActor(server.database, name, role, scene.studyId, site, passwordHash);
		await page.context().clearCookies();
		await signIn(page, person.email);
		await page.goto(`/studies/${scene.studyId}`);
		await expect(page.getByRole('main').getByText(words).first()).toBeVisible();
		if (role === 'board_member') {
			await expect(page).toHaveURL(/\/board$/);
			await expect(page.getByRole('navigation').getByRole('link')).toHaveText(['Board room']);
		}
		await axe(page);
	}
});
