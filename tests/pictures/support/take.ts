import { join } from 'node:path';
import type { Page } from '@playwright/test';
import { root } from '../../../scripts/lib/places.mjs';

/** One page in four looks: wide and narrow, light and dark. */
export async function takePictures(page: Page, folder: string, name: string): Promise<void> {
	for (const [width, height] of [
		[1280, 800],
		[820, 1180]
	] as const) {
		await page.setViewportSize({ width, height });
		for (const colorScheme of ['light', 'dark'] as const) {
			await page.emulateMedia({ colorScheme, reducedMotion: 'reduce' });
			await page.screenshot({
				path: join(root, 'pictures', folder, `${name} ${width} ${colorScheme}.png`),
				fullPage: true
			});
		}
	}
}
