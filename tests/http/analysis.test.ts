import { execFileSync } from 'node:child_process';
import { writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import type { Role } from '../../src/lib/domain/person/roles';
import type { TestedEstimate } from '../../src/lib/stats';
import { estimateCells } from '../../src/lib/report';
import { hashPassword } from '../../src/lib/server/auth/password';
import { allocate, expectedFit, orthodontCsv, sleepCsv } from '../support/analysis';
import { addPerson, addRole, signIn, type Visitor } from '../support/people';
import { startServer, type RunningServer } from '../support/server';

const password = 'linen warp and weft';
let server: RunningServer;
let manager: Visitor;
let hash: string;
let people = 0;

beforeAll(async () => {
	server = await startServer({ worker: true, lookWorker: true });
	hash = await hashPassword(password);
	manager = await person('data_manager', null);
});
afterAll(() => server?.stop());

async function account(role: Role, studyId: string | null): Promise<{ id: string; email: string }> {
	const email = `person${++people}@example.org`;
	const id = await addPerson(server.database, {
		email,
		name: `Person ${people}`,
		passwordHash: hash
	});
	await addRole(server.database, id, role, studyId);
	return { id, email };
}
const person = async (role: Role, studyId: string | null) =>
	signIn(server, (await account(role, studyId)).email, password);

async function newStudy(code: string, template = 'imported-data', masked = false): Promise<string> {
	const made = await manager.send('POST', '/api/studies', {
		template,
		code,
		name: 'A study from a file',
		masked,
		training: false,
		sites: [{ name: 'Northmoor', zone: 'Europe/London' }]
	});
	expect(made.status).toBe(201);
	return ((await made.json()) as { studyId: string }).studyId;
}

/** Asks until the answer is what it should become; what it becomes instead is shown when it does not. */
async function until<T>(ask: () => Promise<T>, enough: (found: T) => boolean): Promise<T> {
	let last: T | undefined;
	for (let tries = 0; tries < 400; tries++) {
		last = await ask();
		if (enough(last)) return last;
		await new Promise((resolve) => setTimeout(resolve, 100));
	}
	throw new Error(`It never came: ${JSON.stringify(last)}\n${server.logs().slice(-3000)}`);
}

const json = async <T>(answer: Response): Promise<T> => {
	const body = (await answer.json()) as T;
	if (!answer.ok) throw new Error(`${answer.status} ${JSON.stringify(body)}`);
	return body;
};

interface Batch {
	version: number;
	status: string;
	summary: { problemCount: number; problems: { message: string }[] } | null;
}
interface Look {
	status: string;
	error: string | null;
	result: {
		growth: {
			coefficients: (TestedEstimate & { name: string })[];
			varianceComponents: { name: string; estimate: number }[];
		};
	} | null;
	inputHash: string | null;
}

async function importAll(study: string, file: string, mapping: unknown): Promise<void> {
	const api = `/api/studies/${study}/imports`;
	const { id, version } = await json<{ id: string; version: number }>(
		await server.fetch(api, {
			method: 'POST',
			body: file,
			headers: {
				cookie: manager.cookie,
				origin: server.origin,
				'content-type': 'text/csv',
				'content-disposition': 'attachment; filename="study.csv"'
			}
		})
	);
	const unsaid = await manager.send('PUT', `${api}/${id}/mapping`, mapping);
	expect(unsaid.status).toBe(428);
	await json(
		await manager.send('PUT', `${api}/${id}/mapping`, mapping, { 'if-match': `"${version}"` })
	);
	const get = async () => json<Batch>(await manager.get(`${api}/${id}`));
	expect((await manager.send('POST', `${api}/${id}/run`)).status).toBe(409);
	await json(await manager.send('POST', `${api}/${id}/check`));
	const checked = await until(get, ({ status }) => status !== 'checking');
	expect(checked.summary).toMatchObject({ problemCount: 0 });
	await json(await manager.send('POST', `${api}/${id}/run`));
	expect((await until(get, ({ status }) => status !== 'importing')).status).toBe('imported');
}

function textOf(pdf: Buffer): string {
	const file = join(server.database.files, 'report.pdf');
	writeFileSync(file, pdf);
	return execFileSync('pdftotext', ['-layout', file, '-'], { encoding: 'utf8' });
}

const sleepMapping = {
	subject: 'subject',
	time: { kind: 'number', column: 'time', unit: 'day' },
	visit: 'visit',
	measures: [{ column: 'y', name: 'Reaction time', unit: 'ms', decimals: 4 }],
	site: { kind: 'site', code: '01' }
};

describe('the sleep-deprivation data of Belenky et al. (2003), all through the API', () => {
	test('in the result and in the PDF’s text stand the reference estimates', async () => {
		const study = await newStudy('SLEEP-01');
		await importAll(study, sleepCsv(), sleepMapping);
		const statistician = await person('statistician', study);
		const member = await account('board_member', study);
		const cut = await json<{ id: string; subjects: number; measurements: number }>(
			await statistician.send('POST', `/api/studies/${study}/cuts`, { label: 'First look' })
		);
		expect(cut).toMatchObject({ subjects: 18, measurements: 180 });
		const asked = await json<{ id: string; number: number }>(
			await statistician.send('POST', `/api/studies/${study}/looks`, {
				cutId: cut.id,
				measure: 'reaction-time',
				timeUnit: 'as given',
				group: 'none'
			})
		);
		const look = await until(
			async () => json<Look>(await statistician.get(`/api/studies/${study}/looks/${asked.id}`)),
			({ status }) => status !== 'waiting' && status !== 'running'
		);
		expect(look).toMatchObject({ status: 'done', error: null });

		const expected = expectedFit('sleepstudy');
		const found = look.result?.growth;
		for (const [ours, theirs] of [
			['intercept', '(Intercept)'],
			['time', 'time']
		] as const) {
			const row = found?.coefficients.find(({ name }) => name === ours);
			expect(row?.estimate).toBeCloseTo(expected.beta[theirs] as number, 6);
			expect(row?.standardError).toBeCloseTo(expected.se[theirs] as number, 6);
		}
		const variance = (name: string) =>
			found?.varianceComponents.find((each) => each.name === name)?.estimate;
		expect(variance('subject')).toBeCloseTo(expected.varcomp.tau2_intercept as number, 2);
		expect(variance('residual')).toBeCloseTo(expected.varcomp.sigma2, 2);

		const made = await json<{ id: string }>(
			await statistician.send('POST', `/api/studies/${study}/looks/${asked.id}/report`)
		);
		await until(
			async () =>
				json<{ status: string }>(
					await statistician.get(`/api/studies/${study}/looks/${asked.id}/report`)
				),
			({ status }) => status === 'made'
		);
		await json(
			await statistician.send('POST', `/api/studies/${study}/reports/${made.id}/releases`, {
				people: [member.id]
			})
		);
		const board = await signIn(server, member.email, password);
		await until(
			async () =>
				json<{ packs: { ready: boolean }[] }>(await board.get(`/api/studies/${study}/board`)),
			({ packs }) => packs[0]?.ready === true
		);
		const answer = await board.get(`/studies/${study}/board/${made.id}/report.pdf`);
		expect(answer.status).toBe(200);
		expect(answer.headers.get('content-disposition')).toBe('attachment; filename="report.pdf"');
		expect(answer.headers.get('cache-control')).toBe('no-store');
		const text = textOf(Buffer.from(await answer.arrayBuffer()));
		// From the reference alone, by the report's own way of writing numbers.
		for (const [theirs, at] of [
			['(Intercept)', 'Level at'],
			['time', 'Change per']
		] as const) {
			const test_ = expected.coef_tests[theirs];
			const df = test_?.kr;
			if (!df) throw new Error('The reference has no Kenward–Roger row');
			const cells = estimateCells({
				estimate: expected.beta[theirs] as number,
				standardError: df.se ?? (expected.se[theirs] as number),
				df: df.df,
				t: df.t,
				p: df.p,
				lower: df.ci_lower,
				upper: df.ci_upper
			});
			const line = text
				.split('\n')
				.find((each) => each.includes(at) && each.includes(cells.estimate));
			expect(line, `${at}: ${cells.estimate}`).toBeDefined();
			for (const cell of [cells.se, cells.df, cells.t, cells.p]) expect(line).toContain(cell);
			expect(line?.replace(/\s+/g, ' ')).toContain(cells.interval);
		}
		expect(text).toContain((expected.varcomp.tau2_intercept as number).toFixed(0));
		expect(text).toContain(expected.varcomp.sigma2.toFixed(1));
		const mail = await server.mailTo(member.email);
		expect(mail.subject).toBe('A document is waiting for you');
	});
});

describe('a masked study', () => {
	test('gives nothing by arm to the trial statistician, by any route of this part', async () => {
		const study = await newStudy('MASKED-01', 'two-arm-trial', true);
		const file = orthodontCsv()
			.split('\n')
			.map((line) =>
				line
					.split(',')
					.filter((_, at) => at !== 3)
					.join(',')
			)
			.join('\n');
		const refused = await server.fetch(`/api/studies/${study}/imports`, {
			method: 'POST',
			body: 'subject,time,arm,y\n1,0,1,2\n',
			headers: { cookie: manager.cookie, origin: server.origin, 'content-type': 'text/csv' }
		});
		expect(refused.status).toBe(422);
		expect(((await refused.json()) as { title: string }).title).toContain(
			'independent statistician'
		);
		await importAll(study, file, {
			subject: 'subject',
			time: { kind: 'number', column: 'time', unit: 'year' },
			visit: 'visit',
			measures: [{ column: 'distance', name: 'Distance', unit: 'mm', decimals: 1 }],
			site: { kind: 'site', code: '01' }
		});
		await allocate(server.database, study, (name) => (name.startsWith('F') ? 'b' : 'a'));
		const statistician = await person('statistician', study);
		const independent = await person('independent_statistician', study);
		const cut = await json<{ id: string }>(
			await statistician.send('POST', `/api/studies/${study}/cuts`, { label: 'First' })
		);
		const model = { measure: 'distance', timeUnit: 'as given', group: 'arms' };
		const turned = await statistician.send('POST', `/api/studies/${study}/looks`, {
			cutId: cut.id,
			...model
		});
		expect(turned.status).toBe(403);
		const asked = await json<{ id: string }>(
			await independent.send('POST', `/api/studies/${study}/looks`, { cutId: cut.id, ...model })
		);
		const read = async (who: Visitor) =>
			json<Look>(await who.get(`/api/studies/${study}/looks/${asked.id}`));
		const look = await until(
			() => read(independent),
			({ status }) => status !== 'waiting' && status !== 'running'
		);
		const slope = look.result?.growth.coefficients.find(({ name }) => name === 'time:group[B]');
		expect(slope?.estimate).toBeCloseTo(expectedFit('orthodont').beta['time:arm'] as number, 6);
		await json(await independent.send('POST', `/api/studies/${study}/looks/${asked.id}/report`));
		const report = await until(
			async () =>
				json<{ id: string; status: string; sha256: string }>(
					await independent.get(`/api/studies/${study}/looks/${asked.id}/report`)
				),
			({ status }) => status === 'made'
		);

		// The hash of a closed file stands in the closed area alone.
		expect(report.sha256).toBeNull();
		const printed = (slope?.estimate as number).toFixed(3).replace('-', '');
		const paths = [
			`/api/studies/${study}/looks`,
			`/api/studies/${study}/looks/${asked.id}`,
			`/api/studies/${study}/looks/${asked.id}/report`,
			`/api/studies/${study}/cuts`,
			`/api/studies/${study}/cuts/${cut.id}`,
			`/api/studies/${study}/plan`,
			`/api/studies/${study}/board`,
			`/studies/${study}/looks`,
			`/studies/${study}/looks/${asked.id}`,
			`/studies/${study}/looks/${asked.id}/__data.json`,
			`/studies/${study}/looks/__data.json`,
			`/studies/${study}/looks/${asked.id}/report.pdf`,
			`/studies/${study}/board`,
			`/studies/${study}/board/${report.id}/report.pdf`,
			`/studies/${study}/cuts/${cut.id}/content.csv`,
			`/studies/${study}/cuts/${cut.id}/content.json`
		];
		for (const who of [statistician, manager])
			for (const path of paths) {
				const answer = await who.get(path);
				const body = Buffer.from(await answer.arrayBuffer()).toString('latin1');
				expect(answer.status, path).toBeLessThan(500);
				for (const secret of [printed, 'coefficients', 'group[B]', 'Arm A', '%PDF'])
					expect(body, `${path}: ${secret}`).not.toContain(secret);
			}
		expect((await statistician.get(`/studies/${study}/looks/${asked.id}/report.pdf`)).status).toBe(
			403
		);
		expect((await independent.get(`/studies/${study}/looks/${asked.id}/report.pdf`)).status).toBe(
			200
		);
	});
});

describe('bad input', () => {
	test.each([
		['a cut without a name', 'cuts', { label: ' ' }, 'label'],
		['a day that does not exist', 'cuts', { label: 'x', cutOffAt: '2026-02-30T00:00' }, 'cutOffAt'],
		['a field that is not there', 'cuts', { label: 'x', extra: 1 }, 'body'],
		['a name with NUL', 'cuts', { label: 'a\u0000b' }, 'label'],
		['a name that is too long', 'cuts', { label: 'x'.repeat(121) }, 'label'],
		['a number for a name', 'cuts', { label: 7 }, 'label'],
		['a look without a cut', 'looks', { cutId: 'none' }, 'cutId'],
		['a look with a list for a measure', 'looks', { measure: ['y'] }, 'measure'],
		['a plan of an unknown method', 'plan', { method: 'MAGIC' }, 'method'],
		['a recommendation of nothing', 'recommendations', { advice: 'perhaps' }, 'advice'],
		[
			'a meeting on a day that does not exist',
			'recommendations',
			{ meetingOn: '2026-13-01' },
			'meetingOn'
		]
	])('%s is refused beside its field, and nothing is written', async (_, path, body, field) => {
		const study = await newStudy(`BAD-${++people}`);
		const who =
			path === 'recommendations'
				? await person('board_member', study)
				: await person('statistician', study);
		const answer = await who.send('POST', `/api/studies/${study}/${path}`, body);
		expect(answer.status).toBe(400);
		const said = (await answer.json()) as { errors: Record<string, string> };
		expect(Object.keys(said.errors)).toContain(field);
		const [[kept]] = (await server.database.sql(
			`select (select count(*) from app.cut where study_id = '${study}')::int + (select count(*) from app.look where study_id = '${study}')::int
				+ (select count(*) from app.monitoring_plan where study_id = '${study}')::int
				+ (select count(*) from app.recommendation where study_id = '${study}')::int as n`
		)) as [[{ n: number }]];
		expect(kept.n).toBe(0);
	});
});
