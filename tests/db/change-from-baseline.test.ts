import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { recordMeasurement } from '../../src/lib/domain/measurement/measurement.commands.server';
import {
	recordMeasurementInput,
	type RecordMeasurementInput
} from '../../src/lib/domain/measurement/measurement.input';
import { applyEdits } from '../../src/lib/domain/study/edits';
import { checkDefinition } from '../../src/lib/domain/study/check';
import { startVisit } from '../../src/lib/domain/visit/conduct.commands.server';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { clock } from '../../src/lib/time/clock';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { refusal } from '../support/refusals';
import { addSubject, around, visitScene, type Scene } from '../support/visit-scene';

let db: FreshDatabase;
let open: Database;
let scene: Scene;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	await db.sql('update app.installation set clock_may_move = true');
	open = openDatabase(db.appUrl);
	useDatabase(open);
	clock.set('2026-06-09T06:00:00Z');
	scene = await visitScene(db, {
		change: (definition) => {
			const edited = applyEdits(definition, [
				{
					edit: 'add',
					list: 'measures',
					item: {
						key: 'weight-change',
						name: 'Change of weight',
						kind: 'derived',
						showLast: 'never',
						unit: 'kg',
						decimals: 1,
						derivedBy: { formula: 'change-from-baseline', inputs: { value: 'measure:weight' } }
					}
				},
				{
					edit: 'cells',
					cells: ['baseline', 'month-3', 'month-6'].map((visit) => ({
						visit,
						measure: 'weight-change',
						on: true
					}))
				},
				{
					edit: 'change',
					list: 'comparisons',
					key: 'diastolic<systolic',
					set: { orEqual: true, weight: 'soft' }
				}
			]);
			if (!edited.ok) throw new Error(edited.problem.message);
			if (checkDefinition(edited.value).length > 0) throw new Error('The study has findings.');
			return edited.value;
		}
	});
});
afterAll(async () => {
	clock.reset();
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

const nurse = () => scene.sites[0].nurse.actor;
const keep = (
	visitId: string,
	key: string,
	entry: RecordMeasurementInput['entry'],
	more: { version?: number; reason?: string; softAnswer?: string } = {}
) => {
	const { version = null, ...given } = more;
	return recordMeasurement(
		nurse(),
		scene.studyId,
		visitId,
		scene.measures[key] as string,
		version,
		recordMeasurementInput.parse({ entry, ...given })
	);
};
const value = (text: string) => ({ kind: 'value', value: text }) as const;
const changeAt = async (visitId: string) => {
	const [rows] = await db.sql(
		`select value::float8 as value, not_done_reason as reason, source from app.measurement
			where visit_id = '${visitId}' and measure_id = '${scene.measures['weight-change']}'`
	);
	return rows?.[0];
};

async function begun() {
	const subject = await addSubject(db, scene, {
		windows: {
			baseline: around('2026-06-09'),
			'month-3': around('2026-06-09'),
			'month-6': around('2026-06-09')
		}
	});
	const [baseline, later, last] = ['baseline', 'month-3', 'month-6'].map(
		(key) => subject.visits[key] as string
	) as [string, string, string];
	for (const visit of [baseline, later, last]) await startVisit(nurse(), scene.studyId, visit, 1);
	return { baseline, later, last };
}

describe('a change from baseline', () => {
	test('is worked out where both values are, and again at every later visit when the baseline is put right', async () => {
		const { baseline, later, last } = await begun();
		await keep(later, 'weight', value('82.4'));
		expect((await changeAt(later))?.value ?? null).toBeNull();
		const first = await keep(baseline, 'weight', value('85.0'));
		expect(await changeAt(baseline)).toMatchObject({ value: 0, source: 'derived' });
		expect(await changeAt(later)).toMatchObject({ value: -2.6, source: 'derived' });
		await keep(last, 'weight', value('86.1'));
		expect(await changeAt(last)).toMatchObject({ value: 1.1 });

		await keep(baseline, 'weight', value('84.0'), {
			version: first.version,
			reason: 'Read from the wrong line.'
		});
		expect(await changeAt(baseline)).toMatchObject({ value: 0 });
		expect(await changeAt(later)).toMatchObject({ value: -1.6 });
		expect(await changeAt(last)).toMatchObject({ value: 2.1 });
		const [events] = await db.sql(
			`select count(*)::int as n from audit.event where record = 'measurement' and action = 'change'
				and after ? 'value' and reason = 'Read from the wrong line.'`
		);
		expect(events?.[0]?.n).toBe(3);
	});

	test('goes when the baseline turns out not to have been measured', async () => {
		const { baseline, later } = await begun();
		const first = await keep(baseline, 'weight', value('85.0'));
		await keep(later, 'weight', value('82.4'));
		expect(await changeAt(later)).toMatchObject({ value: -2.6 });
		await keep(
			baseline,
			'weight',
			{ kind: 'not done', reason: 'Equipment not available' },
			{ version: first.version, reason: 'The scale was broken.' }
		);
		expect((await changeAt(later))?.value).toBeNull();
		expect((await changeAt(later))?.reason).toContain('baseline');
	});
});

describe('a rule across measures that asks', () => {
	const readings = (text: string) => ({ kind: 'readings' as const, values: [text, text] });
	test('lets equal values pass where it says so, asks about broken ones, and keeps the answer', async () => {
		const { later } = await begun();
		await keep(later, 'systolic', readings('100'));
		const first = await keep(later, 'diastolic', readings('100'));
		const again = { version: first.version, reason: 'Measured again.' };
		await refusal(keep(later, 'diastolic', readings('105'), again), 'SOFT_LIMIT');
		await keep(later, 'diastolic', readings('105'), {
			...again,
			softAnswer: 'Measured twice, the same.'
		});
		const [rows] = await db.sql(
			`select value::float8 as value, soft_answer from app.measurement
				where visit_id = '${later}' and measure_id = '${scene.measures.diastolic}'`
		);
		expect(rows).toEqual([{ value: 105, soft_answer: 'Measured twice, the same.' }]);
	});
});
