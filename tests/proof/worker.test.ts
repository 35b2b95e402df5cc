import { setTimeout as wait } from 'node:timers/promises';
import PgBoss from 'pg-boss';
import { SMTPServer } from 'smtp-server';
import { afterAll, beforeAll, expect, test } from 'vitest';
import { build } from '../../scripts/lib/build.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { startImport } from '../../src/lib/domain/import/import.commands.server';
import { newId } from '../../src/lib/id';
import { systemActor } from '../../src/lib/server/actor';
import { changeOwn } from '../../src/lib/server/change';
import { queueMail } from '../../src/lib/server/mail/queue-mail';
import { forgetStorage } from '../../src/lib/server/storage/storage';
import { checkFile, importScene, orthodontMapping } from '../support/analysis';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson } from '../support/people';
import { useAs } from '../support/scene';
import { until } from './support/processes';
import { startProgram, type Running } from './support/programs';
import { expectWholeTrail } from './support/whole';

const origin = 'http://127.0.0.1:1';
let db: FreshDatabase;
let end: () => Promise<void>;
const started: Running[] = [];

/** A mail server that takes its time over a message when told to, and counts what it was given. */
const mail = {
	/** Message ids in the order in which they were taken. */
	taken: [] as string[],
	/** Messages whose text has arrived and that were not answered yet. */
	held: [] as (() => void)[],
	hold: false
};
const server = new SMTPServer({
	authOptional: true,
	disabledCommands: ['STARTTLS'],
	logger: false,
	onData(stream, _, done) {
		let text = '';
		stream.on('data', (chunk: Buffer) => (text += chunk.toString()));
		stream.on('end', () => {
			const id = /^message-id: *(\S+)/im.exec(text)?.[1] ?? 'none';
			const answer = () => {
				mail.taken.push(id);
				done();
			};
			if (mail.hold) mail.held.push(answer);
			else answer();
		});
	}
});
server.on('error', () => {});

beforeAll(async () => {
	await build({ ...testBuild, say: () => {} });
	db = await freshDatabase();
	await new Promise<void>((resolve) => server.listen(0, '127.0.0.1', resolve));
	const { port } = server.server.address() as { port: number };
	useEnvironment(db, {
		SMTP_URL: `smtp://127.0.0.1:${port}`,
		MAIL_FROM: 'Heddle <heddle@heddle.test>',
		ORIGIN: origin
	});
	forgetStorage();
	end = useAs(db.appUrl);
});
afterAll(async () => {
	for (const worker of started) worker.kill('SIGKILL');
	await end?.();
	await new Promise<void>((resolve) => server.close(resolve));
	await db?.drop();
});

async function worker(kind: 'worker' | 'look-worker' = 'worker'): Promise<Running> {
	const made = await startProgram(kind, {
		...db.env,
		SMTP_URL: process.env.SMTP_URL as string,
		MAIL_FROM: process.env.MAIL_FROM as string,
		ORIGIN: origin
	});
	started.push(made);
	return made;
}

async function mails(count: number, tag: string): Promise<string[]> {
	const ids: string[] = [];
	for (let n = 0; n < count; n++) {
		const personId = await addPerson(db, {
			email: `${tag}-${n}@example.org`,
			name: 'Mina Shuttle'
		});
		ids.push(
			await changeOwn(systemActor(newId()), 'test', (writer) =>
				queueMail(writer, {
					kind: 'invitation',
					personId,
					facts: { expires: '8 June 2026, 09:00 UTC' },
					secret: `${origin}/invitation/a-secret-token-that-opens-something`
				})
			)
		);
	}
	return ids;
}
const statuses = async (ids: string[]): Promise<Record<string, number>> => {
	const [rows = []] = await db.sql(
		`select status, count(*)::int as n from app.mail where id = any ('{${ids.join(',')}}') group by 1`
	);
	return Object.fromEntries(rows.map((row) => [row.status, row.n]));
};
const messageIds = async (ids: string[]): Promise<string[]> =>
	((await db.sql(`select message_id from app.mail where id = any ('{${ids.join(',')}}')`))[0] ?? [])
		.map((row) => row.message_id as string)
		.sort();

/** As if the time after which the queue takes a job for lost had gone by; then what a worker does about it now and then. */
async function letTheJobExpire(queue: string): Promise<void> {
	await db.sql(
		`update queue.job set started_on = started_on - interval '1 day' where name = '${queue}' and state = 'active'`
	);
	const boss = new PgBoss({
		connectionString: db.appUrl,
		schema: 'queue',
		migrate: false,
		supervise: false,
		schedule: false
	});
	await boss.start();
	await boss.maintain();
	await boss.stop({ graceful: false, wait: true });
}

test('a worker asked to stop finishes the mails in hand and takes no further one', async () => {
	// One worker has four mails in hand at a time.
	const ids = await mails(7, 'asked');
	mail.hold = true;
	const first = await worker();
	await until(() => mail.held.length === 4, 'the mails to be under way');
	first.kill('SIGTERM');
	let over = false;
	void first.ended.then(() => (over = true));
	await wait(1500);
	expect(over).toBe(false);
	mail.hold = false;
	mail.held.splice(0).forEach((answer) => answer());
	expect(await first.ended).toBe(0);
	expect(await statuses(ids)).toEqual({ sent: 4, waiting: 3 });
	const [jobs] = await db.sql(
		`select state, count(*)::int as n from queue.job where name = 'mail' group by 1 order by 1`
	);
	expect(jobs).toEqual([
		{ state: 'created', n: 3 },
		{ state: 'completed', n: 4 }
	]);
	const second = await worker();
	await until(async () => (await statuses(ids)).sent === 7, 'the others to go out');
	second.kill('SIGTERM');
	expect(await second.ended).toBe(0);
	expect([...mail.taken].sort()).toEqual(await messageIds(ids));
});

test('two workers, and each mail queued three times over: every mail goes out once', async () => {
	mail.taken.length = 0;
	const ids = await mails(60, 'race');
	for (let again = 0; again < 2; again++)
		await changeOwn(systemActor(newId()), 'test', async (writer) => {
			for (const mailId of ids) await writer.enqueue('mail', { mailId });
		});
	const both = await Promise.all([worker(), worker()]);
	await until(
		async () =>
			(
				await db.sql(
					`select from queue.job where name = 'mail' and state in ('created', 'retry', 'active')`
				)
			)[0]?.length === 0,
		'the queue to be empty',
		300
	);
	for (const each of both) each.kill('SIGTERM');
	expect(await Promise.all(both.map((each) => each.ended))).toEqual([0, 0]);
	expect(await statuses(ids)).toEqual({ sent: 60 });
	expect(new Set(mail.taken).size).toBe(mail.taken.length);
	expect([...mail.taken].sort()).toEqual(await messageIds(ids));
	console.log(`60 mails, 180 jobs, two workers: each mail taken once`);
});

test('a mail whose worker was killed while handing it over is never sent twice, and says that it may have arrived', async () => {
	mail.taken.length = 0;
	const ids = await mails(1, 'killed');
	mail.hold = true;
	const first = await worker();
	await until(() => mail.held.length === 1, 'the mail to be under way');
	first.kill('SIGKILL');
	expect(await first.ended).toBe('SIGKILL');
	mail.hold = false;
	mail.held.splice(0).forEach((answer) => answer());
	await letTheJobExpire('mail');
	const second = await worker();
	await until(async () => (await statuses(ids)).doubtful === 1, 'the mail to be tried again', 200);
	second.kill('SIGTERM');
	await second.ended;
	expect(mail.taken).toEqual(await messageIds(ids));
});

test('an import whose worker was killed in the middle is tried again, and is there once', async () => {
	const scene = await importScene(db);
	const rows = Array.from(
		{ length: 24_000 },
		(_, at) => `S${at >> 3},${at & 7},${(at >> 3) % 2 ? 'girl' : 'boy'},${20 + (at % 90) / 10}`
	);
	const batch = await checkFile(scene, `subject,time,sex,distance\n${rows.join('\n')}\n`, {
		...orthodontMapping,
		visit: undefined
	});
	expect(batch.summary?.problems).toEqual([]);
	const { jobRunId } = await startImport(scene.manager, scene.studyId, batch.id, { dryRun: false });
	const run = async () =>
		(
			await db.sql(
				`select j.status, j.fraction, j.attempts, b.status as batch from app.job_run j, app.import_batch b where j.id = '${jobRunId}' and b.id = '${batch.id}'`
			)
		)[0]?.[0];
	const first = await worker();
	await until(async () => (await run()).fraction > 0.3, 'the import to be half done', 120);
	first.kill('SIGKILL');
	expect(await first.ended).toBe('SIGKILL');
	// Nothing of it is there, and the record says what it last knew.
	expect(await run()).toMatchObject({ status: 'running', attempts: 1 });
	const counts = async () =>
		(
			await db.sql(
				`select (select count(*) from app.subject where study_id = '${scene.studyId}')::int as subjects,
				(select count(*) from app.measurement where study_id = '${scene.studyId}')::int as measurements,
				(select count(*) from audit.event where study_id = '${scene.studyId}' and record = 'measurement')::int as events`
			)
		)[0]?.[0];
	await until(
		async () =>
			(
				await db.sql(
					`select from pg_stat_activity where datname = '${db.name}' and application_name = 'heddle' and state = 'idle in transaction'`
				)
			)[0]?.length === 0,
		'the dead worker’s transaction to be over'
	);
	expect(await counts()).toEqual({ subjects: 0, measurements: 0, events: 0 });
	await letTheJobExpire('import');
	const second = await worker();
	await until(async () => ['done', 'failed'].includes((await run()).status), 'the import', 300);
	expect(await run()).toMatchObject({ status: 'done', attempts: 2, batch: 'imported' });
	expect(await counts()).toEqual({ subjects: 3000, measurements: 24_000, events: 24_000 });
	second.kill('SIGTERM');
	expect(await second.ended).toBe(0);
	await expectWholeTrail(db);
});
