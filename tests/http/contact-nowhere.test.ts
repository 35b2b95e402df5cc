import { execFileSync } from 'node:child_process';
import { readdirSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { freezeCut } from '../../src/lib/domain/cut/cut.commands.server';
import {
	mapImport,
	startImport,
	uploadImport
} from '../../src/lib/domain/import/import.commands.server';
import { requestLook } from '../../src/lib/domain/look/look.commands.server';
import { makeReport } from '../../src/lib/domain/report/report.commands.server';
import { readReportFile } from '../../src/lib/domain/report/report-file.server';
import { saveContactDetails } from '../../src/lib/domain/subject/subject.commands.server';
import { addDays, plainDateOf } from '../../src/lib/time/dates';
import { importScene, orthodontCsv, orthodontMapping, type ImportScene } from '../support/analysis';
import { crowd, type Crowd } from '../support/crowd';
import { asOwner } from '../support/people';
import { addressOf, builtRoutes } from '../support/routes';
import { startServer, type RunningServer } from '../support/server';

/** Written nowhere else; what is searched for is in small letters and without blanks. */
const contact = {
	name: 'Ottilie Quennell',
	email: 'ottilie.quennell@post.example',
	phone: '+49 30 55512349',
	language: 'en' as const
};
const traces = ['quennell', 'ottilie', '55512349'];
const holds = (text: string): boolean => {
	const small = text.toLowerCase().replaceAll(/[\s\u00a0]|%20|\+/g, '');
	return traces.some((trace) => small.includes(trace));
};

let server: RunningServer;
let people: Crowd;
let imported: ImportScene;
let problems = '';
let report = '';

async function until(what: string, statement: string, done: (row: never) => boolean) {
	for (let tries = 0; tries < 600; tries++) {
		const [[row] = []] = await server.database.sql(statement);
		if (row && done(row as never)) return;
		await new Promise((resolve) => setTimeout(resolve, 100));
	}
	throw new Error(`${what} never came to an end.\n${server.logs().slice(-3000)}`);
}

/** A file all the way in by the worker, with a name and a telephone number in columns that nobody asked for. */
async function bringIn(csv: string, dryRun: boolean): Promise<string> {
	const { manager, studyId } = imported;
	const batch = await uploadImport(manager, studyId, {
		name: 'study.csv',
		bytes: Buffer.from(csv, 'utf8')
	});
	await mapImport(manager, studyId, batch.id, batch.version, orthodontMapping);
	const step = async (dry: boolean) => {
		const { jobRunId } = await startImport(manager, studyId, batch.id, { dryRun: dry });
		await until(
			'An import',
			`select status from app.job_run where id = '${jobRunId}'`,
			({ status }: { status: string }) => !['waiting', 'running'].includes(status)
		);
	};
	await step(true);
	if (!dryRun) await step(false);
	return batch.id;
}

beforeAll(async () => {
	server = await startServer({ worker: true });
	people = await crowd(server);
	imported = await importScene(server.database);
	await bringIn(orthodontCsv(), false);

	// The same details for a subject of each study.
	const { things, scene, by } = people;
	const kept = await by.coordinator?.send(
		'PUT',
		`/api/studies/${scene.studyId}/subjects/${things.subject}/contact-details`,
		contact,
		{ 'if-match': '"1"' }
	);
	expect(kept?.status).toBe(200);
	const coordinator = await imported.person('coordinator');
	const [[one] = []] = await server.database.sql(
		`select id from app.subject where study_id = '${imported.studyId}' order by number limit 1`
	);
	await saveContactDetails(coordinator, imported.studyId, one.id, contact, 0);

	// Found by name, and told of a visit.
	const found = await by.coordinator?.send('POST', `/api/studies/${scene.studyId}/contact-search`, {
		name: 'quennell'
	});
	expect(await found?.json()).toMatchObject({ items: [{ name: contact.name }] });
	const soon = plainDateOf(new Date(Date.now() + 7 * 86_400_000).toISOString().slice(0, 10));
	const weekday = new Date(`${soon}T00:00:00Z`).getUTCDay();
	const monday = addDays(soon, (8 - weekday) % 7);
	await asOwner(server.database, (client) =>
		client.query(`update app.visit set earliest = $2, target = $3, latest = $4 where id = $1`, [
			things.visit,
			addDays(monday, -3),
			monday,
			addDays(monday, 3)
		])
	);
	const [[visit] = []] = await server.database.sql(
		`select version from app.visit where id = '${things.visit}'`
	);
	const booked = await by.coordinator?.send(
		'POST',
		`/api/studies/${scene.studyId}/visits/${things.visit}/appointment`,
		{
			date: monday,
			time: '09:00',
			roomId: scene.sites[0].rooms[0],
			staffId: scene.sites[0].nurse.id
		},
		{ 'if-match': `"${visit?.version}"` }
	);
	expect(booked?.status, await booked?.text()).toBe(201);
	await server.mailTo(contact.email);

	// A file that is refused, a cut, a look and its report.
	const [head = '', ...rows] = orthodontCsv().trim().split(/\r?\n/);
	const faulty = [
		`${head},name,phone`,
		...rows
			.slice(0, 4)
			.map((row) => `${row.replace(/,[^,]*$/, ',far')},${contact.name},${contact.phone}`)
	].join('\n');
	const batch = await bringIn(`${faulty}\n`, true);
	const file = await people.by['data_manager everywhere']?.get(
		`/studies/${imported.studyId}/import/${batch}/problems.csv`
	);
	problems = (await file?.text()) ?? '';
	const statistician = await imported.person('statistician');
	const cut = await freezeCut(statistician, imported.studyId, { label: 'A cut', cutOffAt: '' });
	const look = await requestLook(statistician, imported.studyId, {
		cutId: cut.id,
		measure: 'distance',
		timeUnit: 'as given',
		group: 'none',
		covariates: [],
		ownLevel: 'yes',
		method: 'REML',
		df: 'kenward-roger'
	});
	await until(
		'The look',
		`select status from app.look where id = '${look.id}'`,
		({ status }: { status: string }) => status === 'done'
	);
	const made = await makeReport(statistician, imported.studyId, look.id);
	await until(
		'The report',
		`select status from app.report where id = '${made.id}'`,
		({ status }: { status: string }) => status === 'made'
	);
	const pdf = join(server.database.files, 'report.pdf');
	writeFileSync(pdf, await readReportFile(statistician, imported.studyId, look.id));
	report =
		execFileSync('pdftotext', ['-layout', pdf, '-'], { encoding: 'utf8' }) +
		execFileSync('pdfinfo', [pdf], { encoding: 'utf8' });
}, 300_000);
afterAll(async () => {
	await people?.close();
	await server?.stop();
});

test('the search finds what it looks for', () => {
	expect(holds(`call ${contact.phone}`)).toBe(true);
	expect(holds('https://a.example/?name=Ottilie%20Quennell')).toBe(true);
	expect(holds('Nobody of that name')).toBe(false);
});

/** The site’s own, where they call and write to people and where they read what changed. */
const meantFor = ['coordinator', 'investigator'];
const meantRoutes = [
	'/(app)/studies/[study=id]/subjects/[subject=id]',
	'/(app)/studies/[study=id]/visits/[visit=id]/chase',
	'/(app)/studies/[study=id]/history',
	'/api/studies/[study=id]/history'
];

test('no page, answer or export holds a contact’s name, address or number, but for the site’s own where they reach people', async () => {
	const told: string[] = [];
	const meant = new Set<string>();
	let answers = 0;
	const things = { ...people.things };
	for (const [who, visitor] of Object.entries(people.by))
		for (const route of builtRoutes().filter(({ methods }) => methods.includes('GET'))) {
			const address = addressOf(route, (param) => things[param] ?? things.subject ?? '');
			const study = `/studies/${imported.studyId}`;
			const addresses = [
				address,
				...(route.page ? [`${address === '/' ? '' : address}/__data.json`] : []),
				...(route.id.includes('history')
					? [`${address}?record=contact_details&id=${things.subject}`]
					: []),
				// The second study's lists and exports, with a name in its own subjects.
				...(route.params.length === 1 && route.params[0] === 'study'
					? [address.replace(/\/studies\/[^/]+/, study)]
					: [])
			];
			for (const each of addresses) {
				// A kept connection may be closed just as it is used again: once more, then.
				const answer = await visitor.get(each).catch(() => visitor.get(each));
				const text = Buffer.from(await answer.arrayBuffer()).toString('latin1');
				answers += 1;
				if (!holds(text)) continue;
				if (meantFor.includes(who) && meantRoutes.includes(route.id)) meant.add(route.id);
				else told.push(`${who}: ${each} (${answer.status})`);
			}
		}
	expect(told).toEqual([]);
	expect(answers).toBeGreaterThan(1000);
	// Whoever may see them does: the walk was where they are.
	expect([...meant].sort()).toEqual([...meantRoutes].sort());
}, 300_000);

test('exports of cuts and of the audit trail hold none, whoever takes them out', async () => {
	const everywhere = people.by['data_manager everywhere'];
	const [cuts = []] = await server.database.sql(`select id, study_id from app.cut order by id`);
	expect(cuts.length).toBeGreaterThan(2);
	let rows = 0;
	for (const cut of cuts)
		for (const format of ['csv', 'json']) {
			const answer = await everywhere?.get(
				`/studies/${cut.study_id}/cuts/${cut.id}/content.${format}`
			);
			expect(answer?.status).toBe(200);
			const text = (await answer?.text()) ?? '';
			rows += text.split('\n').length;
			expect(holds(text)).toBe(false);
		}
	expect(rows).toBeGreaterThan(100);
	const trail = await people.by.auditor?.get(`/studies/${people.scene.studyId}/audit/export.csv`);
	expect(trail?.status).toBe(200);
	const text = (await trail?.text()) ?? '';
	expect(text).toContain('contact');
	expect(holds(text)).toBe(false);
});

test('an import’s problems, a report and its particulars hold none', () => {
	expect(problems).toContain('far');
	expect(holds(problems)).toBe(false);
	expect(report).toContain('Participant flow');
	expect(holds(report)).toBe(false);
});

test('mails name nobody in their subject, and reach the person by the address alone', () => {
	const sent = server.mail.messages.filter((mail) => mail.to.includes(contact.email));
	expect(sent.length).toBeGreaterThan(0);
	for (const mail of server.mail.messages) expect(holds(mail.subject)).toBe(false);
});

test('nothing that the web server or the worker printed holds one', () => {
	const logs = server.logs();
	expect(logs).toContain('contact-search');
	expect(holds(logs)).toBe(false);
});

test('in the database only the contact details themselves hold one: no job’s title or payload, no mail, no trail', async () => {
	const [tables = []] = await server.database.sql(
		`select table_schema || '.' || quote_ident(table_name) as name from information_schema.tables
		where table_schema in ('app', 'audit', 'closed', 'queue') and table_type = 'BASE TABLE' order by 1`
	);
	expect(tables.length).toBeGreaterThan(40);
	const found: string[] = [];
	for (const { name } of tables as { name: string }[]) {
		// The trail keeps who changed what to what, in rows that are marked and that nobody is shown the values of.
		const but = name === 'audit.event' ? 'not t.personal and ' : '';
		const [[row] = []] = await server.database.sql(
			`select count(*)::int as n from ${name} t where ${but}(${traces
				.map((trace) => `replace(t::text, ' ', '') ilike '%${trace}%'`)
				.join(' or ')})`
		);
		if (row?.n > 0) found.push(name);
	}
	expect(found).toEqual(['app.contact_details']);
	const [[titles] = []] = await server.database.sql(`select count(*)::int as n from app.job_run`);
	expect(titles.n).toBeGreaterThan(3);
});

test('no stored file holds one but what a person sent', () => {
	const folder = join(server.database.files, 'open');
	const files = readdirSync(folder, { recursive: true, withFileTypes: true }).filter((entry) =>
		entry.isFile()
	);
	const holding = files
		.map((entry) => join(entry.parentPath, entry.name))
		.filter((file) => holds(readFileSync(file, 'latin1')))
		.map((file) => file.slice(folder.length + 1));
	expect(files.length).toBeGreaterThan(3);
	expect(holding).toEqual([expect.stringMatching(/^imports\//)]);
});
