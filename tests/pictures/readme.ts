import { join } from 'node:path';
import { root } from '../../scripts/lib/places.mjs';
import { test } from '../support/browser';
import { ready, screensByRole, signedIn } from '../support/screens';

/** The three pictures the README shows: whose screen, and what its address ends in. */
const shown = [
	{ name: 'windows', role: 'study coordinator', path: /\/studies\/[^/]+\/windows$/ },
	{ name: 'threads', role: 'study coordinator', path: /\/studies\/[^/]+\/subjects$/ },
	{ name: 'look', role: 'trial statistician', path: /\/studies\/[^/]+\/looks\/[^/]+$/ }
];

for (const { name, role, path } of shown)
	test(`the README’s picture of ${name}`, async ({ browser, heddle }) => {
		const mine = (await screensByRole(heddle)).find((each) => each.account.role === role);
		const screen = mine?.screens.find((each) => path.test(each.path));
		if (!mine || !screen) throw new Error(`The ${role} has no such screen`);
		const context = await signedIn(browser, heddle, mine.account, {
			viewport: { width: 1280, height: 900 },
			colorScheme: 'light'
		});
		const page = await context.newPage();
		await page.goto(screen.path);
		await ready(page);
		await page.screenshot({ path: join(root, 'static', 'readme', `${name}.png`) });
		await context.close();
	});
