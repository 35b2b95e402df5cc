import { parse } from 'papaparse';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import type { AuditEvent } from '../../src/lib/domain/audit/audit.input';
import { crowd, type Crowd } from '../support/crowd';
import { asOwner, type Visitor } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

let server: RunningServer;
let people: Crowd;
const who = (role: string) => people.by[role] as Visitor;
const events = async (visitor: Visitor, query = '') => {
	const answer = await visitor.get(`/api/studies/${people.scene.studyId}/audit${query}`);
	expect(answer.status).toBe(200);
	return (await answer.json()) as { items: AuditEvent[]; nextCursor: string | null };
};

beforeAll(async () => {
	server = await startServer();
	people = await crowd(server);
	const { measurement, visit } = people.things;
	// A value that changes twenty times, with a reason each time.
	await asOwner(server.database, async (client) => {
		for (let n = 1; n <= 20; n++) {
			await client.query(`select set_config('heddle.reason', $1, true)`, [`Read again, ${n}`]);
			await client.query('update app.measurement set value = $2 where id = $1', [measurement, -n]);
		}
		await client.query(`select set_config('heddle.reason', '=HYPERLINK("x")', true)`);
		await client.query(`update app.visit set name = '=1+1' where id = $1`, [visit]);
		await client.query(
			`update app.contact_details set name = 'Selma Hidden' where subject_id = $1`,
			[people.things.subject]
		);
	});
	await who('nurse').get(`/studies/${people.scene.studyId}/audit`);
}, 300_000);
afterAll(async () => {
	await people?.close();
	await server?.stop();
});

describe('the trail', () => {
	test('is paged without a gap or a repeat, newest first', async () => {
		const seen: string[] = [];
		let cursor: string | null = '';
		do {
			const page: { items: AuditEvent[]; nextCursor: string | null } = await events(
				who('auditor'),
				`?limit=40${cursor ? `&cursor=${cursor}` : ''}`
			);
			seen.push(...page.items.map((event) => event.id));
			cursor = page.nextCursor;
		} while (cursor);
		const [rows] = await server.database.sql(
			`select id from audit.event where study_id = '${people.scene.studyId}' order by id desc`
		);
		const there = rows?.map((row) => row.id) ?? [];
		// Reading leaves no event, so nothing was added while the pages were read.
		expect(seen).toEqual(there);
		expect(seen.length).toBeGreaterThan(40);
	});

	test.each<[string, (event: AuditEvent) => boolean]>([
		['record=measurement', (e) => e.record === 'measurement'],
		['action=refused', (e) => e.action === 'refused'],
		['action=change&record=visit', (e) => e.action === 'change' && e.record === 'visit'],
		['role=system', (e) => e.role === 'Heddle itself'],
		['who=the%20nurse', (e) => e.who === 'The nurse'],
		['from=2020-01-01&record=subject', (e) => e.record === 'subject']
	])('filtered by %s shows that and nothing else', async (query, fits) => {
		const { items } = await events(who('auditor'), `?${query}`);
		expect(items.length).toBeGreaterThan(0);
		expect(items.filter((event) => !fits(event))).toEqual([]);
	});

	test('days and subject numbers narrow it', async () => {
		expect((await events(who('auditor'), '?to=2001-01-01')).items).toEqual([]);
		const [rows] = await server.database.sql(
			`select number from app.subject where id = '${people.things.subject}'`
		);
		const { items } = await events(who('auditor'), `?subject=${rows?.[0].number}`);
		expect(items.length).toBeGreaterThan(20);
		expect(new Set(items.map((e) => e.subject))).toEqual(new Set([rows?.[0].number]));
		expect((await events(who('auditor'), '?subject=%25')).items).toEqual([]);
	});

	test('says in words what changed, from what to what and why', async () => {
		const { items } = await events(who('auditor'), '?record=measurement&action=change&limit=1');
		expect(items[0]).toMatchObject({
			changes: [{ field: 'value', before: -19, after: -20 }],
			reason: 'Read again, 20'
		});
		expect(items[0]?.said).toMatch(/^changed: measurement .+, .+/);
		expect(items[0]?.when).toMatch(/\([+−]\d\d:\d\d\)$/);
	});

	test('shows attempts that were turned away', async () => {
		const { items } = await events(who('auditor'), '?action=refused&who=the%20nurse');
		expect(items[0]?.said).toMatch(/^was turned away: read audit/);
	});

	test('keeps what identifies somebody from who may not read contact details', async () => {
		for (const role of ['auditor', 'monitor', 'data_manager']) {
			const { items } = await events(who(role), '?record=contact_details');
			expect(items.length).toBeGreaterThan(0);
			expect(items.every((event) => event.hidden && event.changes.length === 0)).toBe(true);
			expect(JSON.stringify(items)).not.toContain('Selma');
		}
		const page = await (
			await who('auditor').get(`/studies/${people.scene.studyId}/audit?record=contact_details`)
		).text();
		expect(page).not.toContain('Selma');
	});

	test('a monitor reads the site under care and the study, not the other site', async () => {
		const here = await events(who('monitor'), '?limit=200');
		const other = await events(who('monitor elsewhere'), '?limit=200');
		const sites = (page: { items: AuditEvent[] }) =>
			new Set(page.items.map((e) => e.site?.slice(0, 2)).filter(Boolean));
		expect(sites(here).size).toBe(1);
		expect(sites(other).size).toBe(1);
		expect(sites(here)).not.toEqual(sites(other));
	});
});

describe('R-2: the history of a value', () => {
	const history = (visitor: Visitor, record: string, id: string) =>
		visitor.get(`/api/studies/${people.scene.studyId}/history?record=${record}&id=${id}`);

	test('tells all 21 states in order', async () => {
		const answer = await history(who('nurse'), 'measurement', people.things.measurement as string);
		const { items } = (await answer.json()) as { items: AuditEvent[] };
		const values = items.flatMap((e) =>
			e.changes.filter((c) => c.field === 'value').map((c) => c.after)
		);
		expect(values).toEqual([71.5, ...Array.from({ length: 20 }, (_, n) => -(n + 1))]);
	});

	test('another site’s and another study’s is not found, and neither is one for who sees no subjects', async () => {
		const id = people.things.measurement as string;
		expect((await history(who('nurse elsewhere'), 'measurement', id)).status).toBe(404);
		expect((await history(who('stranger'), 'measurement', id)).status).toBe(404);
		expect((await history(who('statistician'), 'measurement', id)).status).toBe(403);
		expect(
			(await history(who('auditor'), 'measurement', people.foreign.things.measurement as string))
				.status
		).toBe(404);
	});

	test('of contact details opens for the coordinator of the site and is hidden from the auditor', async () => {
		const subject = people.things.subject as string;
		expect(await (await history(who('coordinator'), 'contact_details', subject)).text()).toContain(
			'Selma Hidden'
		);
		expect(await (await history(who('auditor'), 'contact_details', subject)).text()).not.toContain(
			'Selma'
		);
	});
});

describe('the export', () => {
	test('holds every event with its zone, runs nothing in a spreadsheet, keeps negative numbers, and is itself recorded', async () => {
		const answer = await who('auditor').get(`/studies/${people.scene.studyId}/audit/export.csv`);
		expect(answer.status).toBe(200);
		expect(answer.headers.get('content-disposition')).toContain('attachment');
		const { data, errors } = parse<Record<string, string>>(await answer.text(), {
			header: true,
			skipEmptyLines: true
		});
		expect(errors).toEqual([]);
		const [rows] = await server.database.sql(
			`select id, record, after from audit.event where study_id = '${people.scene.studyId}' order by id`
		);
		expect([...new Set(data.map((line) => line.event))]).toEqual(rows?.map((row) => row.id));
		expect(rows?.at(-1)).toMatchObject({ record: 'audit', after: { exported: true } });
		for (const line of data) expect(line.at).toMatch(/^\d{4}-\d\d-\d\dT[\d:.]+[+-]\d\d:\d\d$/);
		const values = data.filter((line) => line.record === 'measurement' && line.field === 'value');
		expect(values.map((line) => line.after)).toContain('-20');
		expect(data.map((line) => line.reason)).toContain(`'=HYPERLINK("x")`);
		for (const line of data)
			for (const cell of Object.values(line)) expect(cell).not.toMatch(/^[=+@\t\r]/);
		expect(JSON.stringify(data)).not.toContain('Selma');
	});

	test('follows the filter', async () => {
		const answer = await who('auditor').get(
			`/studies/${people.scene.studyId}/audit/export.csv?record=measurement`
		);
		const { data } = parse<Record<string, string>>(await answer.text(), {
			header: true,
			skipEmptyLines: true
		});
		expect(new Set(data.map((line) => line.record))).toEqual(new Set(['measurement']));
	});
});

describe('jobs', () => {
	test('are all told to the administrator, without what they work on', async () => {
		const answer = await who('administrator').get('/api/jobs');
		const { items } = (await answer.json()) as { items: Record<string, unknown>[] };
		expect(items.length).toBeGreaterThanOrEqual(3);
		expect(items.every((job) => job.study === null)).toBe(true);
	});

	test('one’s progress is for the study’s people and the administrator', async () => {
		const address = `/api/jobs/${people.things.job}`;
		for (const [role, status] of [
			['administrator', 200],
			['statistician', 200],
			['board_member', 404],
			['nobody', 404],
			['stranger', 404]
		] as const)
			expect([role, (await who(role).get(address)).status]).toEqual([role, status]);
	});

	test('are asked to stop by who asked for them and the administrator, and nobody else', async () => {
		const address = `/api/jobs/${people.things.job}/cancel`;
		for (const role of ['statistician', 'auditor', 'data_manager'])
			expect((await who(role).send('POST', address, {})).status).toBe(403);
		expect((await who('stranger').send('POST', address, {})).status).toBe(404);
		expect((await who('administrator').send('POST', address, {})).status).toBe(200);
		const [rows] = await server.database.sql(
			`select cancel_asked from app.job_run where id = '${people.things.job}'`
		);
		expect(rows).toEqual([{ cancel_asked: true }]);
		await server.database.sql(
			`set heddle.actor = '00000000-0000-7000-8000-000000000001'`,
			`update app.job_run set status = 'done' where id = '${people.otherSite.job}'`
		);
		expect(
			(await who('administrator').send('POST', `/api/jobs/${people.otherSite.job}/cancel`, {}))
				.status
		).toBe(409);
	});
});
