import AxeBuilder from '@axe-core/playwright';
import { expect, type Page } from '@playwright/test';

export async function axe(page: Page) {
	const { violations } = await new AxeBuilder({ page }).analyze();
	expect(
		violations.map((each) => `${each.id}: ${each.nodes.map((node) => node.html).join(' ')}`)
	).toEqual([]);
}

/** A look at the page wide and light, narrow and dark; a picture of each where a folder is named. */
export async function looked(page: Page, name: string) {
	const folder = process.env.PICTURES_IN;
	for (const [width, colorScheme] of [
		[1280, 'light'],
		[820, 'dark']
	] as const) {
		await page.setViewportSize({ width, height: 1000 });
		await page.emulateMedia({ colorScheme });
		await axe(page);
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
