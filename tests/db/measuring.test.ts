import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { getHistory } from '../../src/lib/domain/measurement/history.reads.server';
import { recordMeasurement } from '../../src/lib/domain/measurement/measurement.commands.server';
import {
	recordMeasurementInput,
	type RecordMeasurementInput
} from '../../src/lib/domain/measurement/measurement.input';
import { getVisitForm } from '../../src/lib/domain/measurement/visit-form.reads.server';
import { finishVisit, startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addRole, asOwner } from '../support/people';
import { refusal } from '../support/refusals';
import {
	addSubject,
	around,
	visitScene,
	type NewSubject,
	type Scene,
	type SceneSubject
} from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;
const now = '2026-06-09T06:00:00Z';

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set(now);
	scene = await visitScene(db);
});
beforeEach(() => clock.set(now));
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const nurse = () => scene.sites[0].nurse.actor;
const input = (given: Partial<RecordMeasurementInput>) =>
	recordMeasurementInput.parse({ entry: { kind: 'value', value: '88' }, ...given });
const value = (text: string | number, unit?: string) =>
	({ kind: 'value', value: text, ...(unit ? { unit } : {}) }) as const;
const readings = (...values: string[]) => ({ kind: 'readings', values }) as const;

async function under(
	day = '2026-06-09',
	more: Partial<NewSubject> = {}
): Promise<{ subject: SceneSubject; visitId: string }> {
	const subject = await addSubject(db, scene, { windows: { 'month-6': around(day) }, ...more });
	const visitId = subject.visits['month-6'] as string;
	await startVisit(nurse(), scene.studyId, visitId, 1);
	return { subject, visitId };
}
const keep = (
	visitId: string,
	key: string,
	given: Partial<RecordMeasurementInput>,
	version: number | null = null
) =>
	recordMeasurement(
		nurse(),
		scene.studyId,
		visitId,
		scene.measures[key] as string,
		version,
		input(given)
	);
const rowOf = async (visitId: string, key: string) =>
	(
		await db.sql(
			`select * from app.measurement where visit_id = '${visitId}' and measure_id = '${scene.measures[key]}'`
		)
	)[0]?.[0];
async function fill(visitId: string): Promise<void> {
	await keep(visitId, 'creatinine', { entry: value('97') });
	await keep(visitId, 'systolic', { entry: readings('132', '128', '130') });
	await keep(visitId, 'diastolic', { entry: readings('82', '80', '81') });
	await keep(visitId, 'weight', { entry: { kind: 'not done', reason: 'Subject declined' } });
	await keep(visitId, 'potassium', { entry: value('4.6') });
}

describe('measuring', () => {
	test('needs a visit that has begun, at the own site, by a nurse or an investigator', async () => {
		const subject = await addSubject(db, scene, { windows: { 'month-6': around('2026-06-09') } });
		const visitId = subject.visits['month-6'] as string;
		await refusal(keep(visitId, 'creatinine', {}), 'VISIT_STATE');
		await startVisit(nurse(), scene.studyId, visitId, 1);
		const as = (actor: Parameters<typeof recordMeasurement>[0]) =>
			recordMeasurement(
				actor,
				scene.studyId,
				visitId,
				scene.measures.creatinine as string,
				null,
				input({})
			);
		await refusal(as(scene.sites[0].coordinator.actor), 'NOT_PERMITTED');
		await refusal(as(scene.manager.actor), 'NOT_PERMITTED');
		await refusal(as(scene.sites[1].nurse.actor), 'NOT_FOUND');
		await as(nurse());
	});

	test('R-52: no value is stored without a consent, before one that lies ahead, or after it was withdrawn', async () => {
		const without = await addSubject(db, scene, {
			consentedAt: null,
			windows: { 'month-6': around('2026-06-09') }
		});
		await refusal(
			startVisit(nurse(), scene.studyId, without.visits['month-6'] as string, 1),
			'CONSENT_NEEDED'
		);
		// As if begun by another way: the measurement is refused by itself.
		await asOwner(db, (client) =>
			client.query(
				`update app.visit set status = 'under way', happened_on = '2026-06-09' where id = $1`,
				[without.visits['month-6']]
			)
		);
		await refusal(keep(without.visits['month-6'] as string, 'creatinine', {}), 'CONSENT_NEEDED');
		const ahead = await addSubject(db, scene, {
			consentedAt: '2026-06-10T09:00:00Z',
			windows: { 'month-6': around('2026-06-09') }
		});
		await asOwner(db, (client) =>
			client.query(
				`update app.visit set status = 'under way', happened_on = '2026-06-09' where id = $1`,
				[ahead.visits['month-6']]
			)
		);
		await refusal(keep(ahead.visits['month-6'] as string, 'creatinine', {}), 'CONSENT_NEEDED');
		const withdrawn = await under();
		await asOwner(db, (client) =>
			client.query(
				`insert into app.study_exit (id, study_id, site_id, subject_id, kind, happened_on)
				values (gen_random_uuid(), $1, $2, $3, 'consent withdrawn', '2026-06-09')`,
				[scene.studyId, scene.sites[0].id, withdrawn.subject.id]
			)
		);
		await refusal(keep(withdrawn.visitId, 'creatinine', {}), 'LEFT_STUDY');
	});

	test('R-64: the entered unit and value stay beside the converted one', async () => {
		const { visitId } = await under();
		// 1.0 mg/dL × 88.4 = 88.4 µmol/L (standards list §3), kept to whole µmol/L.
		await keep(visitId, 'creatinine', { entry: value('1.0', 'mg/dL') });
		expect(await rowOf(visitId, 'creatinine')).toMatchObject({
			value: 88,
			unit: 'umol/L',
			entered_value: 1,
			entered_unit: 'mg/dL'
		});
		// 150 lb = 68.04 kg.
		await keep(visitId, 'weight', { entry: value('150', '[lb_av]') });
		expect(await rowOf(visitId, 'weight')).toMatchObject({
			value: 68,
			unit: 'kg',
			entered_value: 150,
			entered_unit: '[lb_av]'
		});
	});

	test('repeated readings are kept each, with their mean', async () => {
		const { visitId } = await under();
		await keep(visitId, 'systolic', { entry: readings('132', '128', '130') });
		expect(await rowOf(visitId, 'systolic')).toMatchObject({
			value: 130,
			readings: [132, 128, 130],
			entered_readings: [132, 128, 130]
		});
	});

	test('a derived value is worked out on the server, again when its input changes, and never typed', async () => {
		const { visitId } = await under();
		// CKD-EPI 2021, woman of 55, 0.9 mg/dL: 75.5 (standards list §3).
		await keep(visitId, 'creatinine', { entry: value('0.9', 'mg/dL') });
		const first = await rowOf(visitId, 'egfr');
		expect(first).toMatchObject({ source: 'derived', unit: 'mL/min/{1.73_m2}' });
		expect(Math.abs(first.value - 75.5)).toBeLessThan(0.6);
		await refusal(keep(visitId, 'egfr', { entry: value('60') }), 'RULE');
		await keep(visitId, 'creatinine', { entry: value('200'), reason: 'Read the wrong label' }, 1);
		const second = await rowOf(visitId, 'egfr');
		expect(second.value).toBeLessThan(first.value);
		await keep(
			visitId,
			'creatinine',
			{ entry: { kind: 'not done', reason: 'Sample not usable' }, reason: 'Clotted' },
			2
		);
		expect(await rowOf(visitId, 'egfr')).toMatchObject({
			value: null,
			not_done_reason: expect.stringContaining('serum creatinine is not there')
		});
	});

	test.each([
		['beyond a hard limit', 'creatinine', value('1501'), 'HARD_LIMIT'],
		['below a hard limit', 'creatinine', value('19'), 'HARD_LIMIT'],
		['beyond a hard limit once converted', 'creatinine', value('17', 'mg/dL'), 'HARD_LIMIT'],
		['no number', 'creatinine', value('eighty'), 'RULE'],
		['not a finite number', 'creatinine', value('Infinity'), 'RULE'],
		['too many decimals', 'creatinine', value('88.5'), 'RULE'],
		['blank', 'creatinine', value('  '), 'RULE'],
		['a unit that is not accepted', 'creatinine', value('1', 'kg'), 'RULE'],
		['too few readings', 'systolic', readings('130'), 'RULE'],
		['one value where readings are due', 'systolic', value('130'), 'RULE'],
		['readings where one value is due', 'potassium', readings('4', '5'), 'RULE'],
		['a reason that is not on the list', 'potassium', { kind: 'not done', reason: 'x' }, 'RULE'],
		['unusual, without an answer', 'creatinine', value('320'), 'SOFT_LIMIT']
	] as const)('R-61: the server refuses what is %s', async (_what, key, entry, code) => {
		const { visitId } = await under();
		await refusal(keep(visitId, key, { entry: entry as RecordMeasurementInput['entry'] }), code);
		expect(await rowOf(visitId, key)).toBeUndefined();
	});

	test('an unusual value is kept with the answer; a usual one keeps none', async () => {
		const { visitId } = await under();
		await keep(visitId, 'creatinine', { entry: value('320'), softAnswer: 'Measured again' });
		expect(await rowOf(visitId, 'creatinine')).toMatchObject({
			value: 320,
			soft_answer: 'Measured again'
		});
		await keep(visitId, 'potassium', { entry: value('4.6'), softAnswer: 'Measured again' });
		expect((await rowOf(visitId, 'potassium')).soft_answer).toBeNull();
	});

	test('a change against the last value asks, judged from the earlier visit', async () => {
		const subject = await addSubject(db, scene, {
			windows: { 'month-3': around('2026-06-09'), 'month-6': around('2026-06-09') }
		});
		const [before, now] = [subject.visits['month-3'], subject.visits['month-6']] as string[];
		await startVisit(nurse(), scene.studyId, before as string, 1);
		await keep(before as string, 'weight', { entry: value('80.0') });
		await startVisit(nurse(), scene.studyId, now as string, 1);
		const told = await refusal(
			keep(now as string, 'weight', { entry: value('88.1') }),
			'SOFT_LIMIT'
		);
		// The sentence must not say what was expected.
		expect(told.message).toContain('88.1 kg is an unusual change');
		expect(told.message).not.toContain('80');
		await keep(now as string, 'weight', { entry: value('88.0') });
	});

	test('two values that cannot both be right are refused, whichever comes second', async () => {
		const { visitId } = await under();
		await keep(visitId, 'systolic', { entry: readings('120', '122') });
		const told = await refusal(
			keep(visitId, 'diastolic', { entry: readings('121', '121'), softAnswer: 'checked' }),
			'RULE'
		);
		expect(told.message).toContain('Diastolic pressure must be below Systolic pressure');
	});

	test('R-4: a saved value changes only with a reason that is not blank; the first entry needs none', async () => {
		const { visitId } = await under();
		await keep(visitId, 'potassium', { entry: value('4.6') });
		for (const reason of [undefined, '', '   '])
			await refusal(
				keep(
					visitId,
					'potassium',
					{ entry: value('4.7'), ...(reason === undefined ? {} : { reason }) },
					1
				),
				'REASON_NEEDED'
			);
		await refusal(
			keep(visitId, 'potassium', { entry: { kind: 'not done', reason: 'Subject unwell' } }, 1),
			'REASON_NEEDED'
		);
		expect((await rowOf(visitId, 'potassium')).value).toBe(4.6);
		await keep(visitId, 'potassium', { entry: value('4.7'), reason: 'Misread' }, 1);
		const [why] = await db.sql(
			`select before, after, reason from audit.event where record = 'measurement' and action = 'change' order by id desc limit 1`
		);
		expect(why?.[0]).toMatchObject({
			reason: 'Misread',
			before: { value: 4.6 },
			after: { value: 4.7 }
		});
	});

	test('R-2: twenty changes and a removal leave all states in order', async () => {
		const { visitId } = await under();
		for (let at = 0; at < 20; at++)
			await keep(
				visitId,
				'potassium',
				{ entry: value((4 + at / 10).toFixed(1)), reason: at ? `Change ${at}` : '' },
				at || null
			);
		await keep(
			visitId,
			'potassium',
			{ entry: { kind: 'not done', reason: 'Sample not usable' }, reason: 'All of it was wrong' },
			20
		);
		const history = await getHistory(
			nurse(),
			scene.studyId,
			visitId,
			scene.measures.potassium as string
		);
		expect(history.map((each) => each.what)).toEqual([
			...Array.from({ length: 20 }, (_, at) => `${(4 + at / 10).toFixed(1)} mmol/L`),
			'not done: Sample not usable'
		]);
		expect(history.map((each) => each.reason)[20]).toBe('All of it was wrong');
	});

	test('R-5: the history is read from the value at the own site; another site’s is not there', async () => {
		const { visitId } = await under();
		await keep(visitId, 'potassium', { entry: value('4.6') });
		const measure = scene.measures.potassium as string;
		const [first] = await getHistory(
			scene.sites[0].coordinator.actor,
			scene.studyId,
			visitId,
			measure
		);
		expect(first).toMatchObject({ what: '4.6 mmol/L', role: 'research nurse' });
		expect(first?.at).toContain('Europe/Berlin (+02:00)');
		await refusal(
			getHistory(scene.sites[1].nurse.actor, scene.studyId, visitId, measure),
			'NOT_FOUND'
		);
	});

	test('a stale version changes nothing; a first entry sent twice is one entry', async () => {
		const { visitId } = await under();
		const first = await keep(visitId, 'potassium', { entry: value('4.6') });
		expect(await keep(visitId, 'potassium', { entry: value('4.6') })).toEqual(first);
		await refusal(keep(visitId, 'potassium', { entry: value('4.8') }), 'VERSION_NEEDED');
		await keep(visitId, 'potassium', { entry: value('4.7'), reason: 'Misread' }, 1);
		await refusal(keep(visitId, 'potassium', { entry: value('4.9'), reason: 'x' }, 1), 'STALE');
		await refusal(keep(visitId, 'weight', { entry: value('80') }, 1), 'STALE');
		expect((await rowOf(visitId, 'potassium')).value).toBe(4.7);
	});

	test('R-8: an observation of three days ago keeps its time beside that of its entry; tomorrow’s is refused', async () => {
		const { visitId } = await under();
		await keep(visitId, 'potassium', {
			entry: value('4.6'),
			takenAt: '2026-06-06T08:00:00+02:00'
		});
		const row = await rowOf(visitId, 'potassium');
		expect(row.taken_at.toISOString()).toBe('2026-06-06T06:00:00.000Z');
		expect(row.entered_at.toISOString()).toBe('2026-06-09T06:00:00.000Z');
		await refusal(
			keep(visitId, 'weight', { entry: value('80'), takenAt: '2026-06-10T08:00:00+02:00' }),
			'FUTURE'
		);
	});

	test('R-27: whose role ended keeps nothing more', async () => {
		const { visitId } = await under();
		const roleId = await addRole(db, scene.manager.id, 'nurse', scene.studyId, scene.sites[0].id);
		const { actorFor } = await import('../../src/lib/server/auth/actor');
		const as = async () =>
			recordMeasurement(
				await actorFor(scene.manager.id, 'test'),
				scene.studyId,
				visitId,
				scene.measures.potassium as string,
				null,
				input({ entry: value('4.6') })
			);
		await asOwner(db, (client) =>
			client.query(`update app.person_role set valid_to = '2021-06-08' where id = $1`, [roleId])
		);
		await refusal(as(), 'NOT_PERMITTED');
		await asOwner(db, (client) =>
			client.query(`update app.person_role set valid_to = null where id = $1`, [roleId])
		);
		await as();
	});

	test('earlier values are shown after the entry only, where the measure says so', async () => {
		const subject = await addSubject(db, scene, {
			windows: { 'month-3': around('2026-06-09'), 'month-6': around('2026-06-09') }
		});
		const [before, at] = [subject.visits['month-3'], subject.visits['month-6']] as string[];
		await startVisit(nurse(), scene.studyId, before as string, 1);
		await keep(before as string, 'potassium', { entry: value('4.4') });
		await startVisit(nurse(), scene.studyId, at as string, 1);
		const shown = async () =>
			(await getVisitForm(nurse(), scene.studyId, at as string)).measures.find(
				(each) => each.measure.key === 'potassium'
			)?.earlier;
		expect(await shown()).toEqual([]);
		await keep(at as string, 'potassium', { entry: value('4.6') });
		expect(await shown()).toEqual([{ visit: 'Month 3', value: 4.4 }]);
		const form = await getVisitForm(nurse(), scene.studyId, at as string);
		expect(JSON.stringify(form)).not.toMatch(/softLow|softHigh|softChange/);
	});
});

describe('starting and finishing', () => {
	test('the day is that of the site, not of the server', async () => {
		const [, newYork] = scene.sites;
		// 02:30 UTC on 10 June is still 9 June in New York (−04:00).
		clock.set('2026-06-10T02:30:00Z');
		const subject = await addSubject(db, scene, {
			site: newYork,
			windows: { 'month-6': around('2026-06-09') }
		});
		const started = await startVisit(
			newYork.nurse.actor,
			scene.studyId,
			subject.visits['month-6'] as string,
			1
		);
		expect(started.happenedOn).toBe('2026-06-09');
	});

	test('a visit ends only when each planned measure has a value or a reason', async () => {
		const { visitId } = await under();
		const told = await refusal(finishVisit(nurse(), scene.studyId, visitId, 2), 'INCOMPLETE');
		expect(told.message).toContain('Serum creatinine, Systolic pressure');
		expect(Object.keys(told.fields)).toHaveLength(5);
		await fill(visitId);
		await refusal(finishVisit(nurse(), scene.studyId, visitId, 1), 'STALE');
		expect(await finishVisit(nurse(), scene.studyId, visitId, 2)).toEqual({
			version: 3,
			deviation: null
		});
		const [visits] = await db.sql(`select * from app.visit where id = '${visitId}'`);
		expect(visits?.[0]).toMatchObject({
			status: 'completed',
			finished_by: scene.sites[0].nurse.id
		});
	});

	test('R-62: what cannot be worked out is coded when the visit ends, never blank', async () => {
		const { visitId } = await under('2026-06-09', { characteristics: {} });
		await fill(visitId);
		expect(await rowOf(visitId, 'egfr')).toBeUndefined();
		await finishVisit(nurse(), scene.studyId, visitId, 2);
		expect((await rowOf(visitId, 'egfr')).not_done_reason).toContain('cannot be worked out');
	});

	test.each([
		['late', '2026-05-20', 'late visit', '13 days after it closed'],
		['early', '2026-06-20', 'early visit', '4 days before it opened']
	] as const)(
		'R-60: a %s visit leaves exactly one deviation, also when it is opened and finished again',
		async (_name, day, category, words) => {
			const { visitId } = await under(day);
			await fill(visitId);
			await finishVisit(nurse(), scene.studyId, visitId, 2);
			await asOwner(db, (client) =>
				client.query(`update app.visit set status = 'under way' where id = $1`, [visitId])
			);
			await finishVisit(nurse(), scene.studyId, visitId, 4);
			const [rows] = await db.sql(
				`select category, detail from app.deviation where visit_id = '${visitId}'`
			);
			expect(rows).toHaveLength(1);
			expect(rows?.[0].category).toBe(category);
			expect(rows?.[0].detail).toContain(words);
		}
	);

	test('a value of a finished visit is put right with a reason, and what follows from it too', async () => {
		const { visitId } = await under();
		await fill(visitId);
		await finishVisit(nurse(), scene.studyId, visitId, 2);
		const before = await rowOf(visitId, 'egfr');
		await refusal(keep(visitId, 'creatinine', { entry: value('110') }, 1), 'REASON_NEEDED');
		await keep(
			visitId,
			'creatinine',
			{ entry: value('110'), reason: 'Laboratory corrected it' },
			1
		);
		expect((await rowOf(visitId, 'egfr')).value).not.toBe(before.value);
	});
});
