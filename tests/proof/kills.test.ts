import { setTimeout as wait } from 'node:timers/promises';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import { actorFor } from '../../src/lib/server/auth/actor';
import { hashPassword } from '../../src/lib/server/auth/password';
import { addDays } from '../../src/lib/time/dates';
import { dateInZone } from '../../src/lib/time/zones';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { signIn, type Visitor } from '../support/people';
import { useAs } from '../support/scene';
import { startServer, type RunningServer } from '../support/server';
import { addSubject, visitScene, type Scene, type SceneSubject } from '../support/visit-scene';
import { bookUntil, emptyBookings, slotsFrom, type BookingTally } from './support/bookers';
import { ownCluster, type OwnCluster } from './support/own-cluster';
import { killAtOnce, ownChild, until } from './support/processes';
import { startProgram } from './support/programs';
import { emptyTally, saveUntil, type Tally } from './support/savers';
import { expectWholeBookings, expectWholeSaves, expectWholeTrail } from './support/whole';

/** How many people save measurements, and how many visits each of them has in hand. */
const savers = 4;
const visitsEach = 4;
/** Subjects each of the two coordinators may book before the last kill. */
const toBook = 300;
const password = 'linen warp and weft';
const webProgram = `${testBuild.buildDir}/index.js`;

let cluster: OwnCluster;
let db: FreshDatabase;
let scene: Scene;
let server: RunningServer;
let nurses: Visitor[];
let coordinators: [Visitor, Visitor];

beforeAll(async () => {
	cluster = await ownCluster('proof-kills');
	db = await freshDatabase();
	useEnvironment(db, { MAIL_FROM: 'Heddle <heddle@heddle.test>' });
	const [settings] = await db.sql(
		`select name, setting from pg_settings where name in ('fsync', 'synchronous_commit', 'full_page_writes') order by 1`
	);
	expect(settings?.map((row) => row.setting)).toEqual(['on', 'on', 'on']);
	const end = useAs(db.appUrl);
	scene = await visitScene(db, { passwordHash: await hashPassword(password) });
	await end();
	server = await startServer({ database: db });
	const site = scene.sites[0];
	nurses = [];
	for (let n = 0; n < savers; n++) nurses.push(await signIn(server, site.nurse.email, password));
	coordinators = [
		await signIn(server, site.coordinator.email, password),
		await signIn(server, site.coordinator.email, password)
	];
}, 600_000);

afterAll(async () => {
	await server?.stop();
	await cluster?.remove();
});

/** Subjects whose visit is due about today, at the first site. */
async function subjects(count: number, more: { email?: string; after?: number } = {}) {
	const today = dateInZone(new Date(), scene.sites[0].zone);
	const made: SceneSubject[] = [];
	for (let n = 0; n < count; n++)
		made.push(
			await addSubject(db, scene, {
				email: more.email ? `${n}-${more.email}` : null,
				windows: { 'month-6': [addDays(today, -7), today, addDays(today, more.after ?? 7)] }
			})
		);
	return made;
}

async function begun(count: number): Promise<SceneSubject[]> {
	const made = await subjects(count);
	const end = useAs(db.appUrl);
	const nurse = await actorFor(scene.sites[0].nurse.id, 'scene');
	for (const subject of made)
		await startVisit(nurse, scene.studyId, subject.visits['month-6'] as string, 1);
	await end();
	return made;
}

interface Work {
	saves: Tally;
	bookings: BookingTally;
	/** Waits until so many more saves and bookings were acknowledged. */
	more(saves: number, bookings: number): Promise<void>;
	stop(): Promise<void>;
}

/** Everybody at work, until stopped. `from` shifts the bookings so that no two runs share a time. */
async function atWork(name: string, from: number): Promise<Work> {
	const due = await begun(savers * visitsEach);
	const site = scene.sites[0];
	const bookable = await subjects(2 * toBook, { email: `${name}@example.org`, after: 200 });
	const slots = slotsFrom(addDays(dateInZone(new Date(), site.zone), from), toBook);
	const saves = emptyTally();
	const bookings = emptyBookings();
	let over = false;
	const stopped = () => over;
	const staff = [site.nurse.id, site.coordinator.id];
	const working = [
		...nurses.map((nurse, n) =>
			saveUntil(nurse, scene, due.slice(n * visitsEach, (n + 1) * visitsEach), stopped, saves)
		),
		...coordinators.map((coordinator, n) =>
			bookUntil(
				coordinator,
				scene,
				{ roomId: site.rooms[n] as string, staffId: staff[n] as string },
				bookable.slice(n * toBook, (n + 1) * toBook),
				slots,
				stopped,
				bookings
			)
		)
	];
	// A failure is kept for stop(); it must not count as unhandled meanwhile.
	const all = Promise.all(working);
	all.catch(() => {});
	return {
		saves,
		bookings,
		more: async (moreSaves, moreBookings) => {
			const [s, b] = [saves.kept.length + moreSaves, bookings.booked.length + moreBookings];
			await until(
				() =>
					(saves.kept.length >= s && bookings.booked.length >= b) ||
					saves.wrong.length + bookings.wrong.length > 0,
				'saves to go on',
				120
			);
		},
		stop: async () => {
			over = true;
			await all;
		}
	};
}

/** Somewhere in the middle of the work, never at the same point. */
const aWhile = () => wait(300 + Math.random() * 900);

async function expectAllThere(what: string, { saves, bookings }: Work, kills: number) {
	expect(saves.wrong).toEqual([]);
	expect(bookings.wrong).toEqual([]);
	await expectWholeSaves(db, saves);
	await expectWholeBookings(db, bookings);
	const events = await expectWholeTrail(db);
	console.log(
		`${what} killed ${kills} times: ${saves.kept.length} saves and ${bookings.booked.length} bookings acknowledged, all there; ` +
			`${saves.unanswered + bookings.unanswered} requests unanswered, ${saves.keptUnheard + bookings.bookedUnheard} of them kept all the same; ${events} audit events, all sealed and whole`
	);
}

describe('no acknowledged save is lost and none is half there', () => {
	test('when the web server is killed in the middle of saves', async () => {
		const kills = 3;
		const work = await atWork('web', 0);
		for (let n = 0; n < kills; n++) {
			await work.more(40, 5);
			await aWhile();
			const pid = ownChild(webProgram);
			expect(pid).not.toBeNull();
			await killAtOnce([pid as number]);
		}
		await work.more(40, 5);
		await work.stop();
		expect(work.saves.unanswered).toBeGreaterThan(0);
		await expectAllThere('Web server', work, kills);
	});

	test('when PostgreSQL is killed in the middle of saves, and the web server works on without a restart', async () => {
		const kills = 4;
		const web = ownChild(webProgram);
		const work = await atWork('database', 60);
		for (let n = 0; n < kills; n++) {
			await work.more(40, 5);
			await aWhile();
			await cluster.kill();
			await wait(500);
			await cluster.start();
		}
		await work.more(40, 5);
		await work.stop();
		expect(work.saves.unanswered).toBeGreaterThan(0);
		expect(ownChild(webProgram)).toBe(web);
		await expectAllThere('PostgreSQL', work, kills);
	});

	test('every mail of a booking that was kept then goes out, once', async () => {
		const [[queued]] = (await db.sql(
			`select count(*)::int as mails, count(*) filter (where status = 'waiting')::int as waiting from app.mail`
		)) as [[{ mails: number; waiting: number }]];
		expect(queued.mails).toBeGreaterThan(0);
		expect(queued.waiting).toBe(queued.mails);
		const worker = await startProgram('worker', server.env);
		await until(
			async () =>
				(await db.sql(`select from app.mail where status in ('waiting', 'sending')`))[0]?.length ===
				0,
			'all mails to go out',
			600
		);
		worker.kill('SIGTERM');
		expect(await worker.ended).toBe(0);
		const arrived = server.mail.messages.map((mail) => mail.headers['message-id']).sort();
		const [rows = []] = await db.sql(`select message_id, status from app.mail`);
		expect(new Set(rows.map((row) => row.status))).toEqual(new Set(['sent']));
		expect(arrived).toEqual(rows.map((row) => row.message_id as string).sort());
		console.log(`${arrived.length} mails of kept bookings sent, once each`);
	});
});
