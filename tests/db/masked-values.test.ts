import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { auditFilterInput } from '../../src/lib/domain/audit/audit.input';
import { listEvents } from '../../src/lib/domain/audit/audit.reads.server';
import { snapshot } from '../../src/lib/domain/cut/snapshot.server';
import { lookChoices } from '../../src/lib/domain/look/choices.server';
import { getHistory } from '../../src/lib/domain/measurement/history.reads.server';
import { recordMeasurement } from '../../src/lib/domain/measurement/measurement.commands.server';
import {
	recordMeasurementInput,
	type RecordMeasurementInput
} from '../../src/lib/domain/measurement/measurement.input';
import { getVisitForm } from '../../src/lib/domain/measurement/visit-form.reads.server';
import type { Role } from '../../src/lib/domain/person/roles';
import type { StudyDefinition } from '../../src/lib/domain/study/definition';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { finishVisit, startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import type { Actor } from '../../src/lib/server/actor';
import { read } from '../../src/lib/server/change';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { refusal } from '../support/refusals';
import { withTellingMeasure } from '../support/telling';
import { addActor, addSubject, around, visitScene, type Scene } from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;
let pharmacist: Actor;
const masked: Partial<Record<Role, Actor>> = {};
const now = '2026-06-09T06:00:00Z';
/** A value that stands nowhere else, so that finding it means that it came through. */
const telling = '13.37';

/** Weight alone beside it: what the nurse must enter is not what this is about. */
const shortened = (definition: StudyDefinition): StudyDefinition => {
	const told = withTellingMeasure(definition);
	return {
		...told,
		schedule: { ...told.schedule, 'month-6': ['weight', 'urine-glucose', 'urine-glucose-mean'] }
	};
};

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set(now);
	scene = await visitScene(db, { change: shortened });
	const site = scene.sites[0].id;
	const person = async (role: Role, at: string | null) =>
		(await addActor(db, `Someone ${role}`, role, scene.studyId, at)).actor;
	pharmacist = await person('pharmacist', site);
	masked.nurse = scene.sites[0].nurse.actor;
	masked.coordinator = scene.sites[0].coordinator.actor;
	masked.investigator = await person('investigator', site);
	masked.monitor = await person('monitor', site);
	masked.auditor = await person('auditor', null);
	masked.data_manager = scene.manager.actor;
	masked.statistician = await person('statistician', null);
});
beforeEach(() => clock.set(now));
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const keep = (
	actor: Actor,
	visitId: string,
	key: string,
	text: string,
	given: Partial<RecordMeasurementInput> = {},
	version: number | null = null
) =>
	recordMeasurement(
		actor,
		scene.studyId,
		visitId,
		scene.measures[key] as string,
		version,
		recordMeasurementInput.parse({ entry: { kind: 'value', value: text }, ...given })
	);

async function begun() {
	const subject = await addSubject(db, scene, { windows: { 'month-6': around('2026-06-09') } });
	const visitId = subject.visits['month-6'] as string;
	await startVisit(masked.nurse as Actor, scene.studyId, visitId, 1);
	return { subject, visitId };
}
const keysOf = async (actor: Actor, visitId: string) =>
	(await getVisitForm(actor, scene.studyId, visitId)).measures.map((each) => each.measure.key);

describe('a measure that could reveal the arm', () => {
	test('is asked of the role it names, and of nobody else', async () => {
		const { visitId } = await begun();
		expect(await keysOf(masked.nurse as Actor, visitId)).toEqual(['weight']);
		expect(await keysOf(pharmacist, visitId)).toEqual([
			'weight',
			'urine-glucose',
			'urine-glucose-mean'
		]);
		const form = await getVisitForm(pharmacist, scene.studyId, visitId);
		expect(form.may).toMatchObject({ measure: false, record: true });
		expect(form.measures.map((each) => [each.mayEnter, each.openTo])).toEqual([
			[false, null],
			[true, 'pharmacist'],
			[true, 'pharmacist']
		]);
		await refusal(keep(masked.nurse as Actor, visitId, 'urine-glucose', '5'), 'NOT_FOUND');
		await refusal(keep(pharmacist, visitId, 'weight', '80'), 'NOT_PERMITTED');
	});

	test('R-42: is seen by no masked role, by whatever way, and what is derived from it is not either', async () => {
		const { subject, visitId } = await begun();
		await keep(masked.nurse as Actor, visitId, 'weight', '81.5');
		const { version } = await keep(pharmacist, visitId, 'urine-glucose', '4.25');
		await keep(pharmacist, visitId, 'urine-glucose', telling, { reason: 'Read again' }, version);
		const kept = (
			await db.sql(
				`select value, open_to from app.measurement where visit_id = '${visitId}' and value = ${telling}`
			)
		)[0];
		expect(kept).toEqual([
			{ value: Number(telling), open_to: 'pharmacist' },
			{ value: Number(telling), open_to: 'pharmacist' }
		]);

		const seenBy = async (actor: Actor) => {
			const rows = async (statement: string) => {
				const client = await open.pool.connect();
				try {
					await client.query('begin');
					await client.query('select app.enter($1, $2, $3, $4, $5)', [
						actor.personId,
						'test',
						'test',
						'',
						now
					]);
					return (await client.query(statement)).rows;
				} finally {
					await client.query('rollback');
					client.release();
				}
			};
			return JSON.stringify([
				await rows(`select * from app.measurement`),
				await rows(`select * from audit.event`),
				await rows(`select max(value), count(*) from app.measurement group by visit_id`)
			]);
		};
		for (const [role, actor] of Object.entries(masked))
			expect(await seenBy(actor), role).not.toContain(telling);
		expect(await seenBy(pharmacist)).toContain(telling);

		for (const role of ['nurse', 'coordinator', 'investigator', 'monitor', 'auditor'] as const) {
			const actor = masked[role] as Actor;
			const record = await getSubjectRecord(actor, scene.studyId, subject.id);
			expect(JSON.stringify(record), role).not.toContain(telling);
			expect(JSON.stringify(record), role).toContain('81.5');
			await refusal(
				getHistory(actor, scene.studyId, visitId, scene.measures['urine-glucose'] as string),
				'NOT_FOUND'
			);
		}
		const trail = await listEvents(
			masked.auditor as Actor,
			scene.studyId,
			auditFilterInput.parse({}),
			{
				limit: 200
			}
		);
		expect(JSON.stringify(trail)).not.toContain(telling);
		const history = await getHistory(
			pharmacist,
			scene.studyId,
			visitId,
			scene.measures['urine-glucose'] as string
		);
		expect(history.map((each) => each.what)).toEqual(['4.25 mmol/L', '13.37 mmol/L']);
		expect(history[1]?.reason).toBe('Read again');
	});

	test('is no part of a data cut nor of a look’s choices, whoever makes them', async () => {
		const { visitId } = await begun();
		await keep(pharmacist, visitId, 'urine-glucose', telling);
		clock.set('2026-06-09T08:00:00Z');
		const independent = (
			await addActor(db, 'Indira Vale', 'independent_statistician', scene.studyId)
		).actor;
		for (const actor of [masked.data_manager as Actor, independent]) {
			const content = await read(actor, 'cut.read', { studyId: scene.studyId }, (reader) =>
				snapshot(reader, scene.studyId, new Date('2100-01-01T00:00:00Z'))
			);
			expect(content?.subjects.length).toBeGreaterThan(0);
			expect(content?.measures.map((each) => each.key)).toContain('weight');
			expect(JSON.stringify(content)).not.toMatch(/13\.37|urine-glucose/);
		}
		const choices = await read(independent, 'look.read', { studyId: scene.studyId }, (reader) =>
			lookChoices(reader, scene.studyId)
		);
		expect(choices.definition.measures.map((each) => each.key)).not.toContain('urine-glucose');
	});

	test('does not hold up the visit, and may be entered once it is over; a change needs its reason', async () => {
		const { visitId } = await begun();
		const nurse = masked.nurse as Actor;
		await keep(nurse, visitId, 'weight', '80');
		const { visit } = await getVisitForm(nurse, scene.studyId, visitId);
		await finishVisit(nurse, scene.studyId, visitId, visit.version);
		const { version } = await keep(pharmacist, visitId, 'urine-glucose', '5');
		await refusal(keep(pharmacist, visitId, 'urine-glucose', '6', {}, version), 'REASON_NEEDED');
	});
});
