import { afterAll, beforeAll, expect, test } from 'vitest';
import {
	planKits,
	receiveKits,
	sendKits,
	setKitLevel
} from '../../src/lib/domain/kit/kit.commands.server';
import { keptList, reproduce } from '../../src/lib/domain/randomisation/reproduce.server';
import { startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import {
	addScreening,
	answerEligibility
} from '../../src/lib/domain/subject/screening.commands.server';
import { recordConsent } from '../../src/lib/domain/consent/consent.commands.server';
import { actorFor } from '../../src/lib/server/auth/actor';
import { hashPassword } from '../../src/lib/server/auth/password';
import { addDays } from '../../src/lib/time/dates';
import { dateInZone } from '../../src/lib/time/zones';
import { addBareSubjects, sceneOf, unmaskedList } from '../support/allocation-scene';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner, signIn, type Visitor } from '../support/people';
import {
	consentOn,
	enrolOne,
	makeList,
	makeScene,
	metAnswers,
	particulars,
	useAs,
	type Scene
} from '../support/scene';
import { startServer, type RunningServer } from '../support/server';
import {
	addSubject,
	visitScene,
	type Scene as VisitScene,
	type SceneSubject
} from '../support/visit-scene';
import { slotsFrom } from './support/bookers';
import { expectWholeTrail } from './support/whole';

/** Two web servers on one database: nothing that one of them keeps to itself may decide a race. */
let db: FreshDatabase;
let servers: RunningServer[] = [];
let end: () => Promise<void>;
let scene: Scene;
let visits: VisitScene;
const password = 'linen warp and weft';

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	scene = await makeScene(db, { plannedSubjects: 200 });
	const hash = await hashPassword(password);
	visits = await visitScene(db, { passwordHash: hash });
	await asOwner(db, (client) =>
		client.query('update app.person set password_hash = $1 where id = any ($2)', [
			hash,
			[scene.coordinator.personId, scene.other.personId]
		])
	);
	servers = [await startServer({ database: db }), await startServer({ database: db })];
}, 300_000);
afterAll(async () => {
	for (const server of servers) await server.stop();
	await end?.();
	await db?.drop();
});

/** The same person signed in at both servers; `at(n)` takes them in turn. */
async function everywhere(email: string): Promise<(n: number) => Visitor> {
	const visitors: Visitor[] = [];
	for (const server of servers) visitors.push(await signIn(server, email, password));
	return (n) => visitors[n % visitors.length] as Visitor;
}

const answered = async (answer: Response) => ({
	status: answer.status,
	type: answer.headers.get('content-type'),
	body: (await answer.json()) as Record<string, unknown>
});
const oneEach = <T>(values: readonly T[]) => new Set(values).size === values.length;

test('R-47: 200 randomisations at once through two web servers use the positions 1 to n once each', async () => {
	const north: string[] = [];
	const salt: string[] = [];
	const [first, second] = scene.sites;
	for (let n = 0; n < 120; n++) north.push((await enrolOne(scene)).id);
	for (let n = 0; n < 80; n++) salt.push((await enrolOne(scene, scene.other, second?.id)).id);
	expect(first?.id).not.toBe(second?.id);
	await end();
	await makeList(db, scene);
	end = useAs(db.appUrl);
	const coordinator = await everywhere(scene.coordinator.email);
	const other = await everywhere(scene.other.email);
	const calls = [
		...north.map((id) => ({ id, by: coordinator })),
		...salt.map((id) => ({ id, by: other }))
	].sort((a, b) => (a.id.slice(-6) < b.id.slice(-6) ? -1 : 1));
	const answers = await Promise.all(
		calls.map(async ({ id, by }, n) =>
			answered(
				await by(n).send('POST', `/api/studies/${scene.studyId}/subjects/${id}/randomisation`)
			)
		)
	);
	expect(answers.filter(({ status }) => status >= 300)).toEqual([]);
	expect(oneEach(answers.map(({ body }) => body.kitNumber))).toBe(true);
	const [used] = await db.sql(
		`select stratum ->> 'site' as site, array_agg(position order by position) as places, count(distinct subject_id)::int as subjects
		from closed.list_position where study_id = '${scene.studyId}' and subject_id is not null group by 1 order by 1`
	);
	const upTo = (n: number) => Array.from({ length: n }, (_, at) => at + 1);
	expect(used).toEqual([
		{ site: '01', places: upTo(120), subjects: 120 },
		{ site: '02', places: upTo(80), subjects: 80 }
	]);
	const [kits] = await db.sql(
		`select count(*)::int as n from app.subject s join closed.list_position l on l.subject_id = s.id and l.kit_number = s.kit_number where s.study_id = '${scene.studyId}'`
	);
	expect(kits?.[0].n).toBe(200);
});

test('R-47: 200 by minimisation from the sites’ stock use the numbers 1 to 200 once each, and each gets the arm the method gives', async () => {
	const minimised = await sceneOf(db, {
		plannedSubjects: 200,
		allocation: { method: 'minimisation' }
	});
	const hash = await hashPassword(password);
	await asOwner(db, (client) =>
		client.query('update app.person set password_hash = $1 where id = any ($2)', [
			hash,
			[minimised.coordinator.personId, minimised.other.personId]
		])
	);
	await planKits(minimised.manager, minimised.studyId, { useDays: 10 });
	await end();
	await makeList(db, minimised, 0.8);
	end = useAs(db.appUrl);
	for (const [at, site] of minimised.sites.entries()) {
		await setKitLevel(minimised.manager, minimised.studyId, {
			siteId: site.id,
			fullStock: 300,
			resupplyAt: 200,
			version: 0
		});
		const { id } = await sendKits(minimised.manager, minimised.studyId, {
			siteId: site.id,
			expiresOn: '2099-01-31'
		});
		await receiveKits(at === 0 ? minimised.coordinator : minimised.other, minimised.studyId, id);
	}
	const subjects = await addBareSubjects(db, minimised, 200, (n) => ({
		site: n % 5 < 3 ? 0 : 1,
		stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' }
	}));
	const at = [
		await everywhere(minimised.coordinator.email),
		await everywhere(minimised.other.email)
	];
	const begun = Date.now();
	const answers = await Promise.all(
		subjects.map(async ({ id, siteAt }, n) =>
			answered(
				await at[siteAt]!(n).send(
					'POST',
					`/api/studies/${minimised.studyId}/subjects/${id}/randomisation`
				)
			)
		)
	);
	console.log(`200 at once by minimisation from stock: ${Date.now() - begun} ms`);
	expect(answers.filter(({ status }) => status >= 300)).toEqual([]);
	expect(oneEach(answers.map(({ body }) => body.kitNumber))).toBe(true);
	const [used, kits] = await db.sql(
		`select position from closed.chance where study_id = '${minimised.studyId}' and subject_id is not null order by 1`,
		`select k.kit_number = s.kit_number and k.site_id = s.site_id and l.arm_key = p.arm_key as right from app.kit k
			join app.subject s on s.id = k.subject_id join closed.list_position l on l.subject_id = s.id
			join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number where k.study_id = '${minimised.studyId}'`
	);
	expect(used?.map((row) => row.position)).toEqual(Array.from({ length: 200 }, (_, n) => n + 1));
	expect(kits).toHaveLength(200);
	expect(kits?.every((row) => row.right)).toBe(true);
	const kept = keptList.parse(await unmaskedList(db, minimised));
	expect(reproduce(kept)).toMatchObject({ hash: kept.hash, differences: [] });
});

async function dueSubjects(count: number): Promise<SceneSubject[]> {
	const today = dateInZone(new Date(), visits.sites[0].zone);
	const made: SceneSubject[] = [];
	for (let n = 0; n < count; n++)
		made.push(
			await addSubject(db, visits, {
				email: `race-${n}@example.org`,
				windows: { 'month-6': [addDays(today, -7), today, addDays(today, 60)] }
			})
		);
	return made;
}

test('of 40 clients who book the same room and person at the same time exactly one wins, five times over', async () => {
	const [site] = visits.sites;
	const coordinator = await everywhere(site.coordinator.email);
	const codes: Record<string, number> = {};
	for (const slot of slotsFrom(dateInZone(new Date(), site.zone), 5)) {
		const subjects = await dueSubjects(40);
		const answers = await Promise.all(
			subjects.map(async (subject, n) =>
				answered(
					await coordinator(n).send(
						'POST',
						`/api/studies/${visits.studyId}/visits/${subject.visits['month-6']}/appointment`,
						{ ...slot, roomId: site.rooms[0], staffId: site.nurse.id },
						{ 'if-match': '"1"' }
					)
				)
			)
		);
		const won = answers.filter(({ status }) => status === 201);
		const lost = answers.filter(({ status }) => status !== 201);
		expect(won, JSON.stringify(lost[0])).toHaveLength(1);
		expect(lost).toHaveLength(39);
		for (const { status, type, body } of lost) {
			expect(['ROOM_TAKEN', 'STAFF_TAKEN']).toContain(body.code);
			expect(status).toBe(409);
			expect(type).toBe('application/problem+json');
			codes[body.code as string] = (codes[body.code as string] ?? 0) + 1;
		}
		const ids = subjects.map((subject) => subject.visits['month-6']).join(',');
		const [[kept]] = (await db.sql(
			`select (select count(*) from app.appointment where visit_id = any ('{${ids}}'))::int as appointments,
				(select count(*) from app.visit where id = any ('{${ids}}') and status = 'booked')::int as visits,
				(select count(*) from app.mail m join app.appointment a on a.id = m.appointment_id where a.visit_id = any ('{${ids}}'))::int as mails`
		)) as [Record<string, number>[]];
		expect(kept).toEqual({ appointments: 1, visits: 1, mails: 1 });
	}
	console.log(`5 × 40 bookings of one room: 5 kept, refused ${JSON.stringify(codes)}`);
});

test('of two editors with the same version one is refused with 412, and nothing of theirs is kept', async () => {
	const [site] = visits.sites;
	const nurse = await everywhere(site.nurse.email);
	const actor = await actorFor(site.nurse.id, 'scene');
	const subjects = await dueSubjects(10);
	for (const subject of subjects) {
		const visitId = subject.visits['month-6'] as string;
		await startVisit(actor, visits.studyId, visitId, 1);
		const save = async (n: number, value: string, version: number | null) =>
			answered(
				await nurse(n).send(
					'PUT',
					`/api/studies/${visits.studyId}/visits/${visitId}/measurements/${visits.measures.potassium}`,
					{ entry: { kind: 'value', value }, reason: version ? 'Read again.' : '' },
					version ? { 'if-match': `"${version}"` } : {}
				)
			);
		// A first entry from two tablets: one of them is told that there is a value already.
		const begun = await Promise.all([save(0, '4.1', null), save(1, '4.2', null)]);
		expect(begun.map(({ status }) => status).sort()).toEqual([200, 428]);
		const both = await Promise.all([save(0, '4.6', 1), save(1, '4.7', 1)]);
		expect(both.map(({ status }) => status).sort()).toEqual([200, 412]);
		const winner = both.findIndex(({ status }) => status === 200);
		expect(both[1 - winner]?.body.code).toBe('STALE');
		const [rows] = await db.sql(
			`select m.value, m.version, (select count(*)::int from audit.event e where e.record_id = m.id::text) as events
			from app.measurement m where visit_id = '${visitId}' and measure_id = '${visits.measures.potassium}'`
		);
		expect(rows).toEqual([{ value: winner === 0 ? 4.6 : 4.7, version: 2, events: 2 }]);
	}
});

test('an enrolment sent twice makes one subject', async () => {
	const coordinator = await everywhere(scene.coordinator.email);
	const siteId = scene.sites[0]?.id as string;
	const today = '2026-03-02';
	for (let n = 0; n < 10; n++) {
		const screening = await addScreening(scene.coordinator, scene.studyId, {
			siteId,
			screenedOn: today
		});
		await recordConsent(
			scene.coordinator,
			scene.studyId,
			screening.id,
			consentOn(scene, scene.coordinator, today)
		);
		const { version } = await answerEligibility(
			scene.coordinator,
			scene.studyId,
			screening.id,
			{ answers: await metAnswers(scene) },
			screening.version
		);
		const answers = await Promise.all(
			[0, 1].map(async (at) =>
				answered(
					await coordinator(at).send(
						'POST',
						`/api/studies/${scene.studyId}/screenings/${screening.id}/enrolment`,
						{ enrolledOn: today, ...particulars },
						{ 'if-match': `"${version}"` }
					)
				)
			)
		);
		expect(answers.map(({ status }) => status).sort()).toEqual([201, 409]);
		expect(answers.find(({ status }) => status === 409)?.body.code).toBe('ALREADY_ENTERED');
		const [[there]] = (await db.sql(
			`select count(*)::int as subjects, count(distinct s.number)::int as numbers from app.subject s
			join app.consent c on c.subject_id = s.id where c.screening_id = '${screening.id}'`
		)) as [Record<string, number>[]];
		expect(there).toEqual({ subjects: 1, numbers: 1 });
	}
	const [[all]] = (await db.sql(
		`select count(*)::int as subjects, count(distinct number)::int as numbers from app.subject where study_id = '${scene.studyId}'`
	)) as [Record<string, number>[]];
	expect(all).toEqual({ subjects: 210, numbers: 210 });
});

test('the trail is whole after all of it', async () => {
	expect(await expectWholeTrail(db)).toBeGreaterThan(1000);
});
