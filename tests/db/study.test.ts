import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { editDraft } from '../../src/lib/domain/study/draft.commands.server';
import { createStudy, publishProtocol } from '../../src/lib/domain/study/study.commands.server';
import { getProtocol } from '../../src/lib/domain/study/study.reads.server';
import type { CreateStudyInput } from '../../src/lib/domain/study/study.input';
import { actorFor } from '../../src/lib/server/auth/actor';
import type { Actor } from '../../src/lib/server/actor';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson, addRole } from '../support/people';

let db: FreshDatabase;
let open: Database;
let manager: Actor;
let stranger: Actor;

const input = (change: Partial<CreateStudyInput> = {}): CreateStudyInput => ({
	template: 'two-arm-trial',
	code: 'WEFT-01',
	name: 'Weft',
	masked: true,
	training: false,
	sites: [
		{ name: 'Northmoor', zone: 'Europe/London' },
		{ name: 'Saltreach', zone: 'Europe/Berlin', rooms: ['Blue room', 'Green room'] }
	],
	...change
});

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	open = openDatabase(db.appUrl);
	useDatabase(open);
	const managerId = await addPerson(db, { email: 'mara@example.org', name: 'Mara Quist' });
	await addRole(db, managerId, 'data_manager');
	manager = await actorFor(managerId, 'test');
	const strangerId = await addPerson(db, { email: 'odo@example.org', name: 'Odo Vent' });
	stranger = await actorFor(strangerId, 'test');
});
afterAll(async () => {
	await open?.close();
	useDatabase(undefined);
	await db?.drop();
});

describe('a new study', () => {
	let studyId: string;
	test('comes from its template with sites, rooms and consent versions', async () => {
		({ studyId } = await createStudy(manager, input({ consentApprovedOn: '2025-02-03' })));
		const [[study] = [], sites, rooms, consents] = await db.sql(
			`select code, masked, training, status from app.study where id = '${studyId}'`,
			`select code, name, zone from app.site where study_id = '${studyId}' order by code`,
			`select name from app.room where study_id = '${studyId}' order by name`,
			`select label, approved_on::text from app.consent_version where study_id = '${studyId}'`
		);
		expect(study).toEqual({ code: 'WEFT-01', masked: true, training: false, status: 'draft' });
		expect(sites).toEqual([
			{ code: '01', name: 'Northmoor', zone: 'Europe/London' },
			{ code: '02', name: 'Saltreach', zone: 'Europe/Berlin' }
		]);
		expect(rooms?.map((room) => room.name)).toEqual([
			'Blue room',
			'Green room',
			'Room 1',
			'Room 2'
		]);
		expect(consents).toEqual([{ label: '1.0', approved_on: '2025-02-03' }]);
	});

	test('has a code of its own, whatever the case of its letters', async () => {
		await expect(createStudy(manager, input({ code: 'WEFT-01' }))).rejects.toMatchObject({
			code: 'CODE_TAKEN'
		});
	});

	test('is made by a data manager of the installation, and a refused try stands in the trail', async () => {
		await expect(createStudy(stranger, input({ code: 'NONE-1' }))).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const [events] = await db.sql(
			`select action, record from audit.event where actor = '${stranger.personId}'`
		);
		expect(events).toEqual([{ action: 'refused', record: 'study.create' }]);
	});

	const visit = (key: string, set: Record<string, unknown>) => ({
		edits: [{ edit: 'change' as const, list: 'visits' as const, key, set }]
	});
	const day = (amount: number) => ({ amount, unit: 'day' });

	test('a draft visit changes in place, and a stale change is refused', async () => {
		const before = await getProtocol(manager, studyId);
		const set = { name: 'Month three', lengthMinutes: 50, before: day(10), after: day(12) };
		await editDraft(manager, studyId, visit('month-3', set), before.version);
		await expect(
			editDraft(manager, studyId, visit('month-3', { name: 'Other' }), before.version)
		).rejects.toMatchObject({ code: 'DRAFT_CHANGED', status: 412 });
		const after = await getProtocol(manager, studyId);
		expect(after.definition.visits.find((each) => each.key === 'month-3')).toMatchObject(set);
	});

	test('is not published while its windows overlap', async () => {
		const before = await getProtocol(manager, studyId);
		await editDraft(manager, studyId, visit('month-1', { before: day(30) }), before.version);
		const broken = await getProtocol(manager, studyId);
		await expect(publishProtocol(manager, studyId, broken.version)).rejects.toMatchObject({
			code: 'DEFINITION',
			message: expect.stringContaining('overlap')
		});
		await editDraft(manager, studyId, visit('month-1', { before: day(7) }), broken.version);
	});

	test('is published once: the schedule becomes rows, the study is open, the version is frozen', async () => {
		const draft = await getProtocol(manager, studyId);
		await publishProtocol(manager, studyId, draft.version);
		const [visits, measures, grid, [study] = []] = await db.sql(
			`select key, name, position, length_minutes from app.planned_visit where study_id = '${studyId}' order by position`,
			`select key, unit, decimals, kind from app.measure where study_id = '${studyId}' order by position`,
			`select v.key as visit, m.key as measure from app.planned_measure g
				join app.planned_visit v on v.id = g.planned_visit_id join app.measure m on m.id = g.measure_id
				where g.study_id = '${studyId}'`,
			`select status from app.study where id = '${studyId}'`
		);
		expect(visits).toHaveLength(9);
		expect(visits?.[3]).toEqual({
			key: 'month-3',
			name: 'Month three',
			position: 4,
			length_minutes: 50
		});
		expect(measures?.[2]).toEqual({
			key: 'systolic',
			unit: 'mm[Hg]',
			decimals: 1,
			kind: 'repeated'
		});
		expect(grid).toHaveLength(
			Object.values(draft.definition.schedule).reduce((total, keys) => total + keys.length, 0)
		);
		expect(study?.status).toBe('open');
		await expect(publishProtocol(manager, studyId, draft.version)).rejects.toMatchObject({
			code: 'NOT_DRAFT'
		});
		await expect(
			db.sql(`update app.protocol_version set number = 7 where study_id = '${studyId}'`)
		).rejects.toThrow('never changes');
	});

	test('every row of it stands in the audit trail under its maker', async () => {
		const [counts] = await db.sql(
			`select record, count(*)::int as n from audit.event
				where actor = '${manager.personId}' and study_id = '${studyId}' and action = 'create' group by record`
		);
		const made = Object.fromEntries((counts ?? []).map((row) => [row.record, row.n]));
		expect(made).toMatchObject({
			study: 1,
			site: 2,
			room: 4,
			consent_version: 1,
			protocol_version: 1,
			planned_visit: 9,
			measure: 6
		});
	});
});
