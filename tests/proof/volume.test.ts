import { afterAll, beforeAll, expect, test } from 'vitest';
import { freezeCut, remakeCut } from '../../src/lib/domain/cut/cut.commands.server';
import { actorFor } from '../../src/lib/server/auth/actor';
import { hashPassword } from '../../src/lib/server/auth/password';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner, signIn, type Visitor } from '../support/people';
import { useAs } from '../support/scene';
import { startServer, type RunningServer } from '../support/server';
import { addActor, visitScene, type Scene } from '../support/visit-scene';
import { bigStudy, subjectCount } from './support/big-study';

/** A study of 2,000 subjects with 9 visits each, half at either site; it has been running for a year and a half. */
let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
let server: RunningServer;
let monitor: Visitor;
let coordinator: Visitor;
let statisticianId: string;
const password = 'linen warp and weft';

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	const passwordHash = await hashPassword(password);
	scene = await visitScene(db, { passwordHash });
	const watcher = await addActor(db, 'Mona Pick', 'monitor', scene.studyId, null, passwordHash);
	statisticianId = (
		await addActor(db, 'Stan Reed', 'statistician', scene.studyId, null, passwordHash)
	).id;
	const begun = performance.now();
	await asOwner(db, (client) => bigStudy(client, scene));
	await db.sql('analyze');
	console.log(`made in ${((performance.now() - begun) / 1000).toFixed(1)} s`);
	server = await startServer({ database: db });
	monitor = await signIn(server, watcher.email, password);
	coordinator = await signIn(server, scene.sites[0].coordinator.email, password);
}, 600_000);
afterAll(async () => {
	await server?.stop();
	await end?.();
	await db?.drop();
});

interface Page {
	items: Record<string, unknown>[];
	nextCursor: string | null;
}
async function page(visitor: Visitor, address: string): Promise<{ ms: number; page: Page }> {
	const begun = performance.now();
	const answer = await visitor.get(address);
	const text = await answer.text();
	const ms = performance.now() - begun;
	expect(answer.status, text.slice(0, 300)).toBe(200);
	return { ms, page: JSON.parse(text) as Page };
}
/** Every page to the end; how long the first took and the slowest. */
async function all(visitor: Visitor, address: string, size: number) {
	const items: Record<string, unknown>[] = [];
	const times: number[] = [];
	let cursor: string | null = null;
	do {
		const joined: string = `${address}${address.includes('?') ? '&' : '?'}limit=${size}${cursor ? `&cursor=${encodeURIComponent(cursor)}` : ''}`;
		const { ms, page: found } = await page(visitor, joined);
		times.push(ms);
		items.push(...found.items);
		cursor = found.nextCursor;
		if (cursor) expect(found.items).toHaveLength(size);
	} while (cursor);
	return {
		items,
		told: `${items.length} rows in ${times.length} pages, the first in ${times[0]?.toFixed(0)} ms, the slowest in ${Math.max(...times).toFixed(0)} ms`
	};
}
const count = async (what: string, where: string): Promise<number> =>
	(await db.sql(`select count(*)::int as n from ${what} where ${where}`))[0]?.[0].n;

test('the study is as large as it says', async () => {
	expect(await count('app.subject', `study_id = '${scene.studyId}'`)).toBe(subjectCount);
	expect(await count('app.visit', `study_id = '${scene.studyId}'`)).toBe(subjectCount * 9);
	const measurements = await count('app.measurement', `study_id = '${scene.studyId}'`);
	expect(measurements).toBeGreaterThan(50_000);
	expect(await count('audit.event', `record = 'measurement'`)).toBe(measurements);
});

test('windows: the first page is full and sorted by time left, and the pages together hold each open window once', async () => {
	const address = `/api/studies/${scene.studyId}/windows`;
	for (const [visitor, where] of [
		[monitor, 'true'],
		[coordinator, `v.site_id = '${scene.sites[0].id}'`]
	] as const) {
		const { items, told } = await all(visitor, `${address}?what=due`, 50);
		// Today is each site's own.
		const due = await count(
			'app.visit v join app.site s on s.id = v.site_id',
			`v.status in ('planned', 'booked') and v.earliest <= (now() at time zone s.zone)::date and ${where}`
		);
		expect(due).toBeGreaterThan(200);
		expect(items).toHaveLength(due);
		expect(new Set(items.map((row) => row.visitId)).size).toBe(due);
		const left = items.map((row) => {
			const [latest, today] = [Date.parse(row.latest as string), Date.parse(row.today as string)];
			return latest >= today ? latest - today : 1e15 + (today - latest);
		});
		expect(left).toEqual([...left].sort((a, b) => a - b));
		console.log(`windows (${where === 'true' ? 'all sites' : 'one site'}): ${told}`);
	}
});

test('threads: the first page is full, each subject comes once with all its visits', async () => {
	const { items, told } = await all(monitor, `/api/studies/${scene.studyId}/subjects`, 40);
	expect(items).toHaveLength(subjectCount);
	expect(new Set(items.map((row) => row.number)).size).toBe(subjectCount);
	expect(items.every((row) => (row.visits as unknown[]).length === 9)).toBe(true);
	const numbers = items.map((row) => row.number as string);
	expect(numbers).toEqual([...numbers].sort());
	const ofSite = await all(coordinator, `/api/studies/${scene.studyId}/subjects`, 100);
	expect(ofSite.items).toHaveLength(subjectCount / 2);
	console.log(`threads: ${told}; one site: ${ofSite.told}`);
});

test('the pages of windows and threads come whole', async () => {
	for (const path of ['windows', 'subjects']) {
		const begun = performance.now();
		const answer = await monitor.get(`/studies/${scene.studyId}/${path}`);
		const text = await answer.text();
		expect(answer.status).toBe(200);
		expect(text).toContain('</html>');
		console.log(
			`page ${path}: ${(performance.now() - begun).toFixed(0)} ms, ${(text.length / 1000).toFixed(0)} kB`
		);
	}
});

test('a cut holds every subject and value of the study, and made again it is the same', async () => {
	const statistician = await actorFor(statisticianId, 'volume');
	let begun = performance.now();
	const cut = await freezeCut(statistician, scene.studyId, { label: 'Whole', cutOffAt: '' });
	const frozen = performance.now() - begun;
	expect(cut.subjects).toBe(subjectCount);
	expect(cut.measurements).toBe(
		await count(
			'app.measurement',
			`study_id = '${scene.studyId}' and (value is not null or text_value is not null)`
		)
	);
	begun = performance.now();
	const again = await remakeCut(statistician, scene.studyId, cut.id);
	expect(again.same).toBe(true);
	const [[size]] = (await db.sql(
		`select length(content)::int as n from app.cut where id = '${cut.id}'`
	)) as [{ n: number }[]];
	console.log(
		`cut of ${cut.measurements} values: frozen in ${(frozen / 1000).toFixed(1)} s, made again in ${((performance.now() - begun) / 1000).toFixed(1)} s, ${((size?.n ?? 0) / 1e6).toFixed(1)} MB`
	);
});
