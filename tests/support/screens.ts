import type { Browser, BrowserContext, Page } from '@playwright/test';
import { mayEnter } from '../../src/lib/server/routes';
import { routeAccess } from '../../src/lib/server/routes';
import type { Grant } from '../../src/lib/domain/person/roles';
import { demoAccounts } from './database';
import type { RunningServer } from './server';

/** One page at one address, as the demo has it. */
export interface Screen {
	/** For file names: what the page is. */
	name: string;
	path: string;
}

export interface Account {
	role: string;
	email: string;
	password: string;
	grants: Grant[];
}

/** The demo's accounts with the grants in force. */
export async function accounts(server: RunningServer): Promise<Account[]> {
	const [rows = []] = await server.database.sql(
		`select p.email, jsonb_agg(jsonb_build_object('role', r.role, 'studyId', r.study_id, 'siteId', r.site_id)) as grants
		from app.person_role r join app.person p on p.id = r.person_id where app.in_force(r, current_date) group by p.email`
	);
	const grants = new Map(rows.map((row) => [row.email as string, row.grants as Grant[]]));
	return demoAccounts().map((account) => ({ ...account, grants: grants.get(account.email) ?? [] }));
}

/** What stands for a parameter: ids from the demo, several where the page looks different with each. */
async function examples(
	server: RunningServer
): Promise<Record<string, { name: string; id: string; studyId?: string }[]>> {
	const one = async (text: string) =>
		((await server.database.sql(text))[0] ?? []) as {
			name: string;
			id: string;
			study_id: string;
		}[];
	const as = (rows: { name: string; id: string; study_id: string }[]) =>
		rows.map((row) => ({ name: row.name, id: row.id, studyId: row.study_id }));
	const saltreach = `(select s.id from app.site s where s.name = 'Saltreach')`;
	const visit = (name: string, where: string) =>
		`(select '${name}' as name, v.id, v.study_id from app.visit v where v.site_id = ${saltreach} and ${where} limit 1)`;
	return {
		study: as(
			await one(`select lower(name) as name, id, id as study_id from app.study order by code`)
		),
		subject: as(
			await one(
				`select 'with a miss' as name, v.subject_id as id, v.study_id from app.visit v where v.site_id = ${saltreach} and v.status = 'missed' order by v.latest limit 1`
			)
		),
		visit: as(
			await one(
				[
					visit('booked', `v.status = 'booked'`),
					visit('open', `v.status = 'planned' and current_date between v.earliest and v.latest`),
					visit('completed', `v.status = 'completed' and v.position > 3`),
					visit('passed', `v.status in ('planned', 'booked') and v.latest < current_date`)
				].join(' union all ')
			)
		),
		person: as(
			await one(
				`select 'nurse' as name, id, null as study_id from app.person where email = 'nurse@demo.example'`
			)
		),
		screening: as(
			await one(`(select 'entered' as name, id, study_id from app.screening where site_id = ${saltreach} and outcome = 'entered' limit 1)
			union all (select 'in progress', id, study_id from app.screening where site_id = ${saltreach} and outcome = 'in progress' limit 1)`)
		),
		consent: as(
			await one(
				`select 'of a subject' as name, id, study_id from app.consent where site_id = ${saltreach} and subject_id is not null order by id limit 1`
			)
		),
		signature: as(
			await one(
				`select 'signed' as name, id, study_id from app.signature where site_id = ${saltreach} order by id limit 1`
			)
		),
		print: as(await one(`select 'made' as name, id, study_id from app.code_print limit 1`)),
		delivery: as(await one(`select 'sent' as name, id, study_id from app.kit_delivery limit 1`)),
		batch: as(await one(`select 'imported' as name, id, study_id from app.import_batch limit 1`)),
		look: as(
			await one(
				`select replace(kind, ' ', '-') as name, id, study_id from app.look order by number`
			)
		),
		report: as(await one(`select kind as name, id, study_id from app.report`))
	};
}

/** Every page that somebody with these grants may open, at the demo's addresses. */
export async function screensFor(server: RunningServer, grants: Grant[]): Promise<Screen[]> {
	const known = await examples(server);
	const screens: Screen[] = [];
	for (const [route, methods] of Object.entries(routeAccess)) {
		if (
			!route.startsWith('/(app)') ||
			!methods.GET ||
			/\.\w+$/.test(route) ||
			route.endsWith('/locked')
		)
			continue;
		const names = [...route.matchAll(/\[(\w+)(?:=\w+)?\]/g)].map((match) => match[1] as string);
		for (const study of names.includes('study') ? (known.study ?? []) : [null]) {
			if (!mayEnter(grants, methods.GET, study?.id ?? null)) continue;
			const rest = names.filter((name) => name !== 'study');
			const [name] = rest;
			const chosen = name
				? (known[name] ?? []).filter((each) => !each.studyId || each.studyId === study?.id)
				: [null];
			for (const example of chosen) {
				const path = route
					.replace('/(app)', '')
					.replace(/\[study=id\]/, study?.id ?? '')
					.replace(/\[\w+=id\]/, example?.id ?? '');
				const words = [
					study?.name,
					route.replace(/^\/\(app\)|\/studies\/\[study=id\]|\[|\]|=id/g, ''),
					example?.name
				];
				const query = route.endsWith('/history') ? null : '';
				if (query === null) continue;
				screens.push({
					name: words.filter(Boolean).join(' ').replace(/[/ ]+/g, '-').replace(/^-/, '') || 'start',
					path: path === '' ? '/' : path
				});
			}
		}
	}
	return screens;
}

/** For each role its screens, and whether it is the first to have that screen: what looks the same is examined once. */
export async function screensByRole(
	server: RunningServer
): Promise<{ account: Account; screens: (Screen & { first: boolean })[] }[]> {
	const seen = new Set<string>();
	const list = [];
	for (const account of await accounts(server)) {
		const screens = (await screensFor(server, account.grants)).map((screen) => {
			// Today is another page for each role.
			const own = /^\/studies\/[0-9a-f-]+$/.test(screen.path);
			const first = own || !seen.has(screen.path);
			seen.add(screen.path);
			return { ...screen, first };
		});
		list.push({ account, screens });
	}
	return list;
}

export const publicScreens: Screen[] = [
	{ name: 'sign-in', path: '/sign-in' },
	{ name: 'forgotten', path: '/forgotten' },
	{ name: 'invitation-used', path: '/invitation/not-a-link' },
	{ name: 'reset-used', path: '/reset/not-a-link' },
	{ name: 'set-up-used', path: '/set-up/not-a-link' },
	{ name: 'nothing-here', path: '/no-such-page' }
];

/** A browser context that is signed in. */
export async function signedIn(
	browser: Browser,
	server: RunningServer,
	account: { email: string; password: string },
	options: Parameters<Browser['newContext']>[0] = {}
): Promise<BrowserContext> {
	const context = await browser.newContext({ baseURL: server.origin, locale: 'en-GB', ...options });
	const page = await context.newPage();
	await page.goto('/sign-in');
	await ready(page);
	await page.getByLabel('E-mail address').fill(account.email);
	await page.getByLabel('Password', { exact: true }).fill(account.password);
	await page.getByRole('button', { name: 'Sign in', exact: true }).click();
	await page.waitForURL((url) => !url.pathname.startsWith('/sign-in'));
	await page.close();
	return context;
}

/** Until the page answers to clicks and nothing is being fetched. */
export async function ready(page: Page): Promise<void> {
	await page.locator('html[data-ready]').waitFor({ state: 'attached' });
	await page.waitForLoadState('networkidle');
}
