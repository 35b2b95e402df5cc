import AxeBuilder from '@axe-core/playwright';
import { expect, test } from '../support/browser';
import { publicScreens, ready, screensByRole, signedIn } from '../support/screens';

const tags = ['wcag2a', 'wcag2aa', 'wcag21a', 'wcag21aa', 'wcag22aa', 'best-practice'];

test.describe.configure({ mode: 'parallel' });

async function violations(page: import('@playwright/test').Page, name: string) {
	const { violations: found } = await new AxeBuilder({ page }).withTags(tags).analyze();
	return found.map(
		(each) =>
			`${name}: ${each.id} (${each.help}) at ${each.nodes
				.map((node) => node.target.join(' '))
				.slice(0, 3)
				.join(', ')}`
	);
}

for (const role of [
	'administrator',
	'data manager',
	'study coordinator',
	'research nurse',
	'site investigator',
	'site pharmacist',
	'monitor',
	'auditor',
	'trial statistician',
	'independent statistician',
	'monitoring board member'
])
	test(`every screen of the ${role} opens with a title and fits; the first to have it holds it against axe, wide in light and narrow in dark`, async ({
		browser,
		heddle
	}) => {
		test.setTimeout(600_000);
		const mine = (await screensByRole(heddle)).find((each) => each.account.role === role);
		if (!mine) throw new Error(`The demo has no ${role}`);
		expect(mine.screens.length).toBeGreaterThan(1);
		const said: string[] = [];
		for (const look of [
			{ viewport: { width: 1280, height: 800 }, colorScheme: 'light' },
			{ viewport: { width: 820, height: 1100 }, colorScheme: 'dark' }
		] as const) {
			const context = await signedIn(browser, heddle, mine.account, look);
			const page = await context.newPage();
			page.on('pageerror', (error) => said.push(`${page.url()}: ${error.message}`));
			for (const screen of mine.screens) {
				if (!screen.first && look.viewport.width < 1000) continue;
				const answer = await page.goto(screen.path);
				if (!answer?.ok()) said.push(`${screen.name}: ${answer?.status()}`);
				if (screen.first) await ready(page);
				if (!/\S · Heddle$/.test(await page.title()))
					said.push(`${screen.name}: the title is “${await page.title()}”`);
				const wide = await page.evaluate(
					() => document.documentElement.scrollWidth > innerWidth + 1
				);
				if (wide) said.push(`${screen.name}: wider than the screen at ${look.viewport.width}`);
				if (screen.first) said.push(...(await violations(page, screen.name)));
			}
			await context.close();
		}
		expect(said).toEqual([]);
	});

test('the screens before sign-in pass axe', async ({ browser, heddle }) => {
	const said: string[] = [];
	const context = await browser.newContext({ baseURL: heddle.origin });
	const page = await context.newPage();
	for (const screen of publicScreens) {
		await page.goto(screen.path);
		await ready(page);
		said.push(...(await violations(page, screen.name)));
	}
	await context.close();
	expect(said).toEqual([]);
});

test('the keyboard reaches everything that answers to a click, and shows where it is', async ({
	browser,
	heddle
}) => {
	test.setTimeout(900_000);
	const said: string[] = [];
	for (const { account, screens } of await screensByRole(heddle)) {
		const context = await signedIn(browser, heddle, account);
		const page = await context.newPage();
		for (const screen of screens.filter((each) => each.first)) {
			await page.goto(screen.path);
			await ready(page);
			const wanted = await page.evaluate(() => {
				const all = [
					...document.querySelectorAll<HTMLElement>(
						'main a[href], main button, main input, main select, main textarea, main summary'
					)
				];
				const seen = all.filter(
					(each) =>
						each.checkVisibility() &&
						!each.matches(':disabled') &&
						each.tabIndex >= 0 &&
						(each as HTMLInputElement).type !== 'hidden'
				);
				seen.slice(0, 60).forEach((each, n) => each.setAttribute('data-wanted', String(n)));
				return seen.slice(0, 60).map((each) => ({
					name:
						(each.textContent ?? '').trim().slice(0, 30) ||
						each.getAttribute('name') ||
						each.tagName,
					// One stop serves a group of radio buttons.
					group:
						(each as HTMLInputElement).type === 'radio' ? (each as HTMLInputElement).name : null
				}));
			});
			const reached = new Set<number>();
			const unseen: string[] = [];
			// A day has stops of its own for day, month, year and the calendar.
			const dates = await page.locator('main input[type=date]').count();
			const most = wanted.length + 40 + 4 * dates;
			for (let n = 0; n < most && reached.size < wanted.length; n++) {
				await page.keyboard.press('Tab');
				const at = await page.evaluate(() => {
					const active = document.activeElement as HTMLElement | null;
					if (!active || active === document.body) return null;
					const style = getComputedStyle(active);
					return {
						wanted: active.getAttribute('data-wanted'),
						shown: style.outlineStyle !== 'none' && parseFloat(style.outlineWidth) > 0
					};
				});
				if (at?.wanted) {
					reached.add(Number(at.wanted));
					if (!at.shown) unseen.push(wanted[Number(at.wanted)]?.name ?? '');
				}
			}
			const groups = new Set([...reached].map((n) => wanted[n]?.group).filter(Boolean));
			const missed = wanted.filter(
				(each, n) => !reached.has(n) && !(each.group && groups.has(each.group))
			);
			if (missed.length > 0)
				said.push(
					`${account.role} ${screen.name}: not reached: ${missed.map((each) => each.name).join(', ')}`
				);
			if (unseen.length > 0)
				said.push(`${account.role} ${screen.name}: no visible focus: ${unseen.join(', ')}`);
		}
		await context.close();
	}
	expect(said).toEqual([]);
});
