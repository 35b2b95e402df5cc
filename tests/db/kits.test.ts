import pg from 'pg';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	loseKit,
	planKits,
	receiveKits,
	sendKits,
	setKitLevel
} from '../../src/lib/domain/kit/kit.commands.server';
import { findLowStock, getKitStock } from '../../src/lib/domain/kit/kit.reads.server';
import { leastKits, levelErrors, spareKits } from '../../src/lib/domain/kit/stock';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { clock } from '../../src/lib/time/clock';
import { addBareSubjects, sceneOf } from '../support/allocation-scene';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { makeList, makeScene, useAs, type Scene } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set('2026-03-10T12:00:00Z');
});
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

async function listFor(scene: Scene): Promise<void> {
	await makeList(db, scene);
	end = useAs(db.appUrl);
}
const siteOf = (scene: Scene, at = 0) => scene.sites[at]?.id as string;
/** The numbers of a site, as everybody reads them. */
const stockOf = async (scene: Scene, at = 0) =>
	(await getKitStock(scene.manager, scene.studyId)).sites[at]!;
const held = async (scene: Scene, at = 0) => {
	const [rows] = await db.sql(
		`select p.arm_key, count(*)::int as n from app.kit k join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number
			where k.site_id = '${siteOf(scene, at)}' and k.status = 'in stock' group by 1 order by 1`
	);
	return Object.fromEntries((rows ?? []).map((row) => [row.arm_key, row.n])) as Record<
		string,
		number
	>;
};
const unavailable = {
	code: 'ALLOCATION_UNAVAILABLE',
	message: 'No allocation can be given at the moment. Nothing was changed. Tell the study office.'
};

test('levels stand in the ratio, and the least with which somebody is randomised leaves every arm there', () => {
	const arms = (...ratios: number[]) => ratios.map((ratio) => ({ ratio }));
	expect(spareKits(arms(1, 1), 20)).toBe(10);
	expect(leastKits(arms(1, 1), 20)).toBe(11);
	expect(spareKits(arms(2, 1), 21)).toBe(7);
	expect(spareKits(arms(3, 2, 1), 24)).toBe(4);
	expect(levelErrors(arms(2, 1), { fullStock: 20, resupplyAt: 18 })).toHaveProperty('fullStock');
	expect(levelErrors(arms(1, 1), { fullStock: 20, resupplyAt: 10 })).toHaveProperty('resupplyAt');
	expect(levelErrors(arms(1, 1), { fullStock: 20, resupplyAt: 20 })).toHaveProperty('resupplyAt');
	expect(levelErrors(arms(1, 1), { fullStock: 20, resupplyAt: 14 })).toEqual({});
});

describe('the stock of a site', () => {
	let scene: Scene;
	beforeAll(async () => {
		scene = await makeScene(db, { plannedSubjects: 80 });
	});

	test('is planned by the data manager before anybody is randomised, with levels that make sense', async () => {
		for (const actor of [scene.coordinator, scene.independent])
			await expect(planKits(actor, scene.studyId, { useDays: 30 })).rejects.toMatchObject({
				code: 'NOT_PERMITTED'
			});
		await planKits(scene.manager, scene.studyId, { useDays: 30 });
		await expect(planKits(scene.manager, scene.studyId, { useDays: 30 })).rejects.toMatchObject({
			code: 'CONFLICT'
		});
		const level = { siteId: siteOf(scene), fullStock: 12, resupplyAt: 9, version: 0 };
		await expect(
			setKitLevel(scene.manager, scene.studyId, { ...level, fullStock: 13 })
		).rejects.toMatchObject({ code: 'INVALID', fields: { fullStock: expect.any(String) } });
		await expect(
			setKitLevel(scene.manager, scene.studyId, { ...level, resupplyAt: 6 })
		).rejects.toMatchObject({ code: 'INVALID', fields: { resupplyAt: expect.any(String) } });
		await setKitLevel(scene.manager, scene.studyId, level);
		await expect(
			setKitLevel(scene.manager, scene.studyId, { ...level, fullStock: 10, version: 1 })
		).rejects.toMatchObject({ code: 'INVALID' });
		await expect(
			sendKits(scene.manager, scene.studyId, { siteId: siteOf(scene), expiresOn: '2027-01-31' })
		).rejects.toMatchObject({ code: 'KIT_LIST_NEEDED' });
		await listFor(scene);
	});

	test('without kits the answer is the neutral one; a delivery brings each arm in the ratio, unseen', async () => {
		const [one] = await addBareSubjects(db, scene, 1, () => ({ site: 0 }));
		await expect(randomiseSubject(scene.coordinator, scene.studyId, one!.id)).rejects.toMatchObject(
			unavailable
		);
		const sent = await sendKits(scene.manager, scene.studyId, {
			siteId: siteOf(scene),
			expiresOn: '2027-01-31'
		});
		expect(sent.kits).toBe(12);
		await expect(
			sendKits(scene.manager, scene.studyId, { siteId: siteOf(scene), expiresOn: '2027-01-31' })
		).rejects.toMatchObject({ code: 'KITS_FULL' });
		await expect(randomiseSubject(scene.coordinator, scene.studyId, one!.id)).rejects.toMatchObject(
			unavailable
		);
		await expect(receiveKits(scene.other, scene.studyId, sent.id)).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
		expect(await receiveKits(scene.coordinator, scene.studyId, sent.id)).toEqual({ kits: 12 });
		await expect(receiveKits(scene.coordinator, scene.studyId, sent.id)).rejects.toMatchObject({
			code: 'CONFLICT'
		});
		expect(await held(scene)).toEqual({ a: 6, b: 6 });
		// Delivery, numbers and counts as everybody reads them hold no arm, and are in the order of the numbers.
		const seen = await getKitStock(scene.coordinator, scene.studyId);
		expect(seen.deliveries[0]?.numbers).toEqual([...(seen.deliveries[0]?.numbers ?? [])].sort());
		expect(JSON.stringify(seen)).not.toMatch(/arm|Treatment/i);
		expect(seen.sites[0]).toMatchObject({ toGive: 12, given: 0, low: false, least: 7 });
	});

	test('gives a kit in stock at the site, of the right kind, until too few are left; and says in time that it runs low', async () => {
		const subjects = await addBareSubjects(db, scene, 8, (n) => ({
			site: 0,
			stratum: { 'kidney-function': n % 2 ? 'below-45' : 'from-45' }
		}));
		const given: string[] = [];
		for (const { id } of subjects.slice(0, 6))
			given.push((await randomiseSubject(scene.coordinator, scene.studyId, id)).kitNumber);
		// 12 − 6 = 6 is one fewer than the least: the seventh is refused, whichever arm it would have had.
		await expect(
			randomiseSubject(scene.coordinator, scene.studyId, subjects[6]!.id)
		).rejects.toMatchObject(unavailable);
		const [rows, mails, [at] = []] = await db.sql(
			`select k.kit_number, k.site_id, l.arm_key as of_subject, p.arm_key as of_kit from app.kit k
				join closed.list_position l on l.subject_id = k.subject_id
				join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number
				where k.study_id = '${scene.studyId}' and k.status = 'given'`,
			`select person_id from app.mail where kind = 'kits-low' and study_id = '${scene.studyId}'`,
			`select told_at from app.kit_level where site_id = '${siteOf(scene)}'`
		);
		expect(rows?.map((row) => row.kit_number).sort()).toEqual([...given].sort());
		for (const row of rows ?? []) {
			expect(row.of_subject).toBe(row.of_kit);
			expect(row.site_id).toBe(siteOf(scene));
		}
		const here = await held(scene);
		expect(Math.min(here.a ?? 0, here.b ?? 0)).toBeGreaterThanOrEqual(0);
		// Told once, when it came down to 9: the coordinator of the site and the data manager.
		expect(mails?.map((row) => row.person_id).sort()).toEqual(
			[scene.coordinator, scene.manager].map((each) => each.personId).sort()
		);
		expect(at?.told_at).not.toBeNull();
		expect(await findLowStock(scene.coordinator, scene.studyId)).toEqual([
			{ site: 'Northmoor', toGive: 6, resupplyAt: 9 }
		]);
		// Filled up by what is gone, whichever arms these were.
		const sent = await sendKits(scene.manager, scene.studyId, {
			siteId: siteOf(scene),
			expiresOn: '2027-02-28'
		});
		expect(sent.kits).toBe(6);
		await receiveKits(scene.coordinator, scene.studyId, sent.id);
		expect(await held(scene)).toEqual({ a: 6, b: 6 });
		await randomiseSubject(scene.coordinator, scene.studyId, subjects[6]!.id);
	});

	test('counts what is damaged, lost or too old as gone', async () => {
		const before = await stockOf(scene);
		const [[kit] = [], [gone] = []] = await db.sql(
			`select kit_number from app.kit where site_id = '${siteOf(scene)}' and status = 'in stock' limit 1`,
			`select kit_number from app.kit where site_id = '${siteOf(scene)}' and status = 'given' limit 1`
		);
		const fate = { status: 'damaged' as const, note: 'Fell from the shelf.' };
		await expect(
			loseKit(scene.coordinator, scene.studyId, { ...fate, kitNumber: 'K1' })
		).rejects.toMatchObject({ code: 'INVALID' });
		await expect(
			loseKit(scene.coordinator, scene.studyId, { ...fate, kitNumber: gone?.kit_number })
		).rejects.toMatchObject({ code: 'CONFLICT' });
		await expect(
			loseKit(scene.other, scene.studyId, { ...fate, kitNumber: kit?.kit_number })
		).rejects.toMatchObject({ code: 'NOT_FOUND' });
		await loseKit(scene.coordinator, scene.studyId, { ...fate, kitNumber: kit?.kit_number });
		expect(await stockOf(scene)).toMatchObject({ toGive: before.toGive - 1, damaged: 1 });
		// 30 days before the first delivery's last day it is too old to be given.
		clock.set('2027-01-05T12:00:00Z');
		const later = await stockOf(scene);
		expect(later.expired).toBeGreaterThan(0);
		expect(later.toGive + later.expired).toBe(before.toGive - 1);
		const [one] = await addBareSubjects(db, scene, 1, () => ({ site: 0 }));
		if (later.toGive < 7)
			await expect(
				randomiseSubject(scene.coordinator, scene.studyId, one!.id)
			).rejects.toMatchObject(unavailable);
		clock.set('2026-03-10T12:00:00Z');
	});

	test('is not to be altered past its commands', async () => {
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		for (const text of [
			`update app.kit set status = 'in stock', subject_id = null where status = 'given'`,
			`update app.kit set kit_number = 'K00000-0' where status = 'in stock'`,
			`insert into app.kit (study_id, kit_number, site_id, delivery_id, expires_on) select study_id, 'K1', site_id, delivery_id, expires_on from app.kit limit 1`
		]) {
			await client.query('begin');
			await client.query(`select app.enter($1, 'coordinator', 'test', '', null)`, [
				scene.coordinator.personId
			]);
			await expect(client.query(text)).rejects.toMatchObject({
				code: expect.stringMatching(/HD006|42501/)
			});
			await client.query('rollback');
		}
		await client.end();
	});

	test('cannot be begun once a kit was given', async () => {
		const late = await makeScene(db, { plannedSubjects: 8 });
		await listFor(late);
		const [one] = await addBareSubjects(db, late, 1, () => ({ site: 0 }));
		await randomiseSubject(late.coordinator, late.studyId, one!.id);
		await expect(planKits(late.manager, late.studyId, { useDays: 0 })).rejects.toMatchObject({
			code: 'KITS_BEGUN'
		});
	});
});

describe('under load', () => {
	test.each(['permuted-blocks', 'minimisation'] as const)(
		'50 at the same instant get 50 kits of their site’s stock, by %s',
		async (method) => {
			const scene = await sceneOf(db, { plannedSubjects: 60, allocation: { method } });
			await planKits(scene.manager, scene.studyId, { useDays: 10 });
			await listFor(scene);
			for (const at of [0, 1]) {
				await setKitLevel(scene.manager, scene.studyId, {
					siteId: siteOf(scene, at),
					fullStock: 60,
					resupplyAt: 40,
					version: 0
				});
				const { id } = await sendKits(scene.manager, scene.studyId, {
					siteId: siteOf(scene, at),
					expiresOn: '2027-01-31'
				});
				await receiveKits(at === 0 ? scene.coordinator : scene.other, scene.studyId, id);
			}
			const subjects = await addBareSubjects(db, scene, 50, (n) => ({ site: n % 2 }));
			const kits = await Promise.all(
				subjects.map(({ id, siteAt }) =>
					randomiseSubject(siteAt === 0 ? scene.coordinator : scene.other, scene.studyId, id)
				)
			);
			expect(new Set(kits.map((each) => each.kitNumber)).size).toBe(50);
			const [rows, mails] = await db.sql(
				`select k.site_id = s.site_id as here, k.kit_number = s.kit_number as same, l.arm_key = p.arm_key as right_kind from app.kit k
					join app.subject s on s.id = k.subject_id join closed.list_position l on l.subject_id = s.id
					join closed.list_position p on p.study_id = k.study_id and p.kit_number = k.kit_number where k.study_id = '${scene.studyId}'`,
				`select person_id from app.mail where kind = 'kits-low' and study_id = '${scene.studyId}'`
			);
			expect(rows).toHaveLength(50);
			expect(rows?.every((row) => row.here && row.same && row.right_kind)).toBe(true);
			// Each site came down to 35: its coordinator once, the data manager once for each.
			const told = [scene.coordinator, scene.other, scene.manager].map(
				({ personId }) => mails?.filter((mail) => mail.person_id === personId).length
			);
			expect(told).toEqual([1, 1, 2]);
		}
	);
});
