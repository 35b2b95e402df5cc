import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	mapImport,
	startImport,
	uploadImport
} from '../../src/lib/domain/import/import.commands.server';
import {
	getImport,
	previewImport,
	problemsFile
} from '../../src/lib/domain/import/import.reads.server';
import { cancelJob } from '../../src/lib/domain/job/job.commands.server';
import { importJob } from '../../src/lib/server/imports/job';
import { forgetStorage } from '../../src/lib/server/storage/storage';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import {
	checkFile,
	importFile,
	importScene,
	orthodontCsv,
	orthodontMapping,
	runImport,
	type ImportScene
} from '../support/analysis';
import { useAs } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	forgetStorage();
	end = useAs(db.appUrl);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});

const rowsOf = async (studyId: string) => {
	const [[counts]] = (await db.sql(
		`select (select count(*) from app.subject where study_id = '${studyId}')::int as subjects,
			(select count(*) from app.visit where study_id = '${studyId}')::int as visits,
			(select count(*) from app.measurement where study_id = '${studyId}')::int as measurements,
			(select count(*) from app.planned_visit where study_id = '${studyId}')::int as planned`
	)) as [[Record<string, number>]];
	return counts;
};
const nothing = { subjects: 0, visits: 0, measurements: 0, planned: 0 };

describe('an existing study comes in from a file', () => {
	let scene: ImportScene;
	beforeAll(async () => {
		scene = await importScene(db);
	});

	test('with a protocol version of its own, subject numbers and its times as given', async () => {
		const batch = await importFile(scene, orthodontCsv(), orthodontMapping);
		expect(batch.status).toBe('imported');
		expect(batch.summary).toMatchObject({
			problemCount: 0,
			subjects: 27,
			newSubjects: 27,
			visits: 108,
			values: 108,
			missing: 0,
			protocol: {
				visits: ['Visit 1', 'Visit 2', 'Visit 3', 'Visit 4'],
				measures: ['Distance'],
				characteristics: ['Sex']
			}
		});
		expect(await rowsOf(scene.studyId)).toEqual({
			subjects: 27,
			visits: 108,
			measurements: 108,
			planned: 4
		});
		const [[study], [first], times, [published]] = (await db.sql(
			`select status from app.study where id = '${scene.studyId}'`,
			`select s.number, s.imported_as, s.characteristics, m.value, m.unit, m.source, v.happened_on, v.study_time
				from app.subject s join app.visit v on v.subject_id = s.id join app.measurement m on m.visit_id = v.id
				where s.study_id = '${scene.studyId}' and s.imported_as = 'M01' order by v.study_time limit 1`,
			`select distinct study_time from app.visit where study_id = '${scene.studyId}' order by 1`,
			`select status, definition ->> 'timeUnit' as unit from app.protocol_version where study_id = '${scene.studyId}'`
		)) as [Record<string, unknown>[], Record<string, unknown>[], unknown[], unknown[]];
		expect(study).toEqual({ status: 'open' });
		expect(first).toMatchObject({
			number: '01-0001-6',
			imported_as: 'M01',
			characteristics: { sex: 'boy' },
			unit: 'mm',
			source: 'import',
			happened_on: null
		});
		expect(Number(first?.value)).toBe(26);
		expect(times.map((row) => Number((row as { study_time: string }).study_time))).toEqual([
			0, 2, 4, 6
		]);
		expect(published).toEqual({ status: 'published', unit: 'year' });
	});

	test('every row that came in has its row in the audit trail, by the person who imported', async () => {
		const [events] = await db.sql(
			`select record, count(*)::int as n, bool_and(actor = '${scene.manager.personId}') as own from audit.event
				where study_id = '${scene.studyId}' and action = 'create' and record in ('subject', 'visit', 'measurement')
				group by record order by record`
		);
		expect(events).toEqual([
			{ record: 'measurement', n: 108, own: true },
			{ record: 'subject', n: 27, own: true },
			{ record: 'visit', n: 108, own: true }
		]);
	});

	test('and not a second time: the same subjects at the same times are refused whole', async () => {
		const again = await checkFile(scene, orthodontCsv(), orthodontMapping);
		expect(again.summary?.problemCount).toBe(216);
		expect(again.summary?.problems[0]).toEqual({
			row: 2,
			column: 'time',
			message: 'M01 already has a visit at this time in the study.'
		});
		await expect(
			startImport(scene.manager, scene.studyId, again.id, { dryRun: false })
		).rejects.toMatchObject({ code: 'CONFLICT' });
		expect((await rowsOf(scene.studyId))?.visits).toBe(108);
	});

	test('later rows of known subjects are added to them', async () => {
		const batch = await importFile(
			scene,
			'subject,visit,time,sex,distance\nM01,5,8,boy,32.5\nM17,1,0,boy,24\n',
			orthodontMapping
		);
		expect(batch.status).toBe('imported');
		expect(await rowsOf(scene.studyId)).toMatchObject({ subjects: 28, visits: 110 });
		const [added] = await db.sql(
			`select v.planned_visit_id, v.name from app.visit v join app.subject s on s.id = v.subject_id
				where s.study_id = '${scene.studyId}' and s.imported_as = 'M01' and v.study_time = 8`
		);
		// The study plans four visits: a fifth stands beside them.
		expect(added).toEqual([{ planned_visit_id: null, name: 'Visit 5' }]);
	});

	test('what does not fit the study is told: another measure, unit, time, value, site', async () => {
		const found = await checkFile(
			scene,
			'subject,site,visit,t,sex,weight,distance\nM01,02,9,3,girl,70,1.25\nX1,07,1,0,other,70,1\n',
			{
				...orthodontMapping,
				time: { kind: 'number', column: 't', unit: 'month' },
				site: { kind: 'column', column: 'site' },
				measures: [
					{ column: 'weight', name: 'Weight', unit: 'kg', decimals: 0 },
					{ column: 'distance', name: 'Distance', unit: 'cm', decimals: 2 }
				]
			}
		);
		expect(
			found.summary?.problems.map(({ row, column, message }) => `${row} ${column}: ${message}`)
		).toEqual([
			'null weight: “Weight” is not a measure of this study.',
			'null distance: “Distance” is measured in mm with 1 decimals in this study.',
			'null t: This study counts time in years. Give the file’s time in them.',
			'2 sex: M01 stands in the study with another value of “Sex”.',
			'2 subject: M01 stands in the study with another value of “site”.',
			'3 sex: “other” is not one of the choices of “Sex” in this study.',
			'3 site: “07” is not a site of this study. Its sites: 01, 02.'
		]);
	});
});

describe('problems', () => {
	test('are listed by row and column, all counted, and nothing at all is written', async () => {
		const scene = await importScene(db);
		const bad = Array.from({ length: 700 }, (_, at) => `S${at},${at % 4},boy,x${at}`);
		const batch = await checkFile(
			scene,
			`subject,time,sex,distance\nA1,0,girl,21.5\nA1,0,girl,22\n${bad.join('\n')}\nB1,=1,boy,3\n`,
			{ ...orthodontMapping, visit: undefined }
		);
		expect(batch.status).toBe('checked');
		expect(batch.summary?.problemCount).toBe(702);
		expect(batch.summary?.problems).toHaveLength(500);
		expect(batch.summary?.problems.slice(0, 2)).toEqual([
			{ row: 3, column: 'time', message: 'A1 already has a row for this time: row 2.' },
			{
				row: 4,
				column: 'distance',
				message: '“x0” is not a number. Leave the cell empty when the value is missing.'
			}
		]);
		const listed = (await problemsFile(scene.manager, scene.studyId, batch.id))
			.toString('utf8')
			.trim()
			.split('\r\n');
		expect(listed).toHaveLength(703);
		expect(listed[0]).toBe('row,column,problem');
		await expect(
			startImport(scene.manager, scene.studyId, batch.id, { dryRun: false })
		).rejects.toMatchObject({ code: 'CONFLICT' });
		expect(await rowsOf(scene.studyId)).toEqual(nothing);
	});

	test('of the whole file are refused as it is handed in', async () => {
		const scene = await importScene(db);
		const give = (bytes: Buffer) =>
			uploadImport(scene.manager, scene.studyId, { name: 'x.csv', bytes });
		await expect(give(Buffer.from([0x61, 0x2c, 0xfc, 0x0a]))).rejects.toThrow(/UTF-8/);
		await expect(give(Buffer.from(''))).rejects.toThrow(/no rows/);
		await expect(give(Buffer.from('a,a\n1,2\n'))).rejects.toThrow(/called “a”/);
		await expect(give(Buffer.alloc(50 * 1024 * 1024 + 1, 0x61))).rejects.toMatchObject({
			code: 'TOO_LARGE'
		});
	});

	test('a failure in the middle of writing leaves nothing, not even the protocol version', async () => {
		const scene = await importScene(db);
		// Something that only the database refuses, met by the last of three thousand rows.
		await db.sql(
			`create function app.fail_late() returns trigger language plpgsql as $$
				begin if new.value = 99.5 then raise exception 'no room'; end if; return new; end $$`,
			`create trigger fail_late before insert on app.measurement for each row execute function app.fail_late()`
		);
		const rows = Array.from({ length: 2500 }, (_, at) => `S${at >> 2},${at & 3},${at % 90}`);
		const text = `subject,time,distance\n${rows.join('\n')}\nLAST,0,99.5\n`;
		const batch = await checkFile(scene, text, {
			...orthodontMapping,
			visit: undefined,
			characteristic: undefined
		});
		expect(batch.summary?.problemCount).toBe(0);
		await expect(runImport(scene, batch.id)).rejects.toThrow('no room');
		expect(await rowsOf(scene.studyId)).toEqual(nothing);
		expect((await getImport(scene.manager, scene.studyId, batch.id)).status).toBe('failed');
		await db.sql(`drop trigger fail_late on app.measurement`, `drop function app.fail_late`);
		const [[version]] = (await db.sql(
			`select status from app.protocol_version where study_id = '${scene.studyId}'`
		)) as [[{ status: string }]];
		expect(version.status).toBe('draft');
	});

	test('a cancelled import leaves nothing and may be begun again', async () => {
		const scene = await importScene(db);
		const batch = await checkFile(scene, orthodontCsv(), orthodontMapping);
		const { jobRunId } = await startImport(scene.manager, scene.studyId, batch.id, {
			dryRun: false
		});
		await cancelJob(scene.manager, jobRunId);
		await importJob({ payload: { batchId: batch.id, jobRunId, dryRun: false }, lastTry: true });
		expect(await rowsOf(scene.studyId)).toEqual(nothing);
		expect((await getImport(scene.manager, scene.studyId, batch.id)).status).toBe('checked');
		expect((await runImport(scene, batch.id)).status).toBe('imported');
	});

	test('an old mapping does not overwrite a newer one', async () => {
		const scene = await importScene(db);
		const { manager, studyId } = scene;
		const batch = await uploadImport(manager, studyId, {
			name: 'x.csv',
			bytes: Buffer.from(orthodontCsv())
		});
		await mapImport(manager, studyId, batch.id, batch.version, orthodontMapping);
		await expect(
			mapImport(manager, studyId, batch.id, batch.version, orthodontMapping)
		).rejects.toMatchObject({ code: 'STALE' });
		await expect(
			mapImport(manager, studyId, batch.id, batch.version + 1, {
				...orthodontMapping,
				subject: 'who'
			})
		).rejects.toMatchObject({ code: 'MAPPING' });
	});
});

describe('dates', () => {
	test('become actual days from each subject’s first, and the day of entering the study', async () => {
		const scene = await importScene(db);
		const batch = await importFile(
			scene,
			'child;sex;visit;date;height\nC1;girl;Baseline;2024-01-10;101,5\nC1;girl;Month 6;2024-07-15;104\nC2;boy;Baseline;2024-02-01;99\nC2;boy;Month 6;2024-07-20;\n',
			{
				subject: 'child',
				time: { kind: 'date', column: 'date', anchor: { kind: 'first-date' } },
				visit: 'visit',
				characteristic: { column: 'sex', name: 'Sex' },
				covariates: [],
				measures: [{ column: 'height', name: 'Height', unit: 'cm', decimals: 1 }],
				decimalSign: ',',
				missing: [],
				site: { kind: 'site', code: '02' }
			}
		);
		expect(batch.summary).toMatchObject({ problemCount: 0, values: 3, missing: 1 });
		const [visits, subjects, [absent]] = (await db.sql(
			`select s.imported_as, v.name, v.happened_on::text, v.study_time, p.key from app.visit v
				join app.subject s on s.id = v.subject_id left join app.planned_visit p on p.id = v.planned_visit_id
				where v.study_id = '${scene.studyId}' order by 1, 3`,
			`select number, enrolled_on::text from app.subject where study_id = '${scene.studyId}' order by 1`,
			`select value, not_done_reason from app.measurement where study_id = '${scene.studyId}' and value is null`
		)) as [unknown[], unknown[], unknown[]];
		expect(visits).toEqual([
			{
				imported_as: 'C1',
				name: 'Baseline',
				happened_on: '2024-01-10',
				study_time: null,
				key: 'baseline'
			},
			{
				imported_as: 'C1',
				name: 'Month 6',
				happened_on: '2024-07-15',
				study_time: null,
				key: 'month-6'
			},
			{
				imported_as: 'C2',
				name: 'Baseline',
				happened_on: '2024-02-01',
				study_time: null,
				key: 'baseline'
			},
			{
				imported_as: 'C2',
				name: 'Month 6',
				happened_on: '2024-07-20',
				study_time: null,
				key: 'month-6'
			}
		]);
		expect(subjects).toEqual([
			{ number: '02-0001-4', enrolled_on: '2024-01-10' },
			{ number: '02-0002-2', enrolled_on: '2024-02-01' }
		]);
		expect(absent).toEqual({ value: null, not_done_reason: 'Missing in the imported file' });
	});
});

describe('a masked study', () => {
	test('takes no allocation: neither in the file’s columns nor by the mapping', async () => {
		const scene = await importScene(db, { template: 'two-arm-trial', masked: true });
		const { manager, studyId } = scene;
		await expect(
			uploadImport(manager, studyId, {
				name: 'x.csv',
				bytes: Buffer.from('subject,time,arm,y\nS1,0,1,2\n')
			})
		).rejects.toThrow(/“arm” looks like the allocation/);
		const batch = await uploadImport(manager, studyId, {
			name: 'x.csv',
			bytes: Buffer.from('subject,time,code,y\nS1,0,1,2\n')
		});
		await expect(
			mapImport(manager, studyId, batch.id, batch.version, {
				...orthodontMapping,
				visit: undefined,
				characteristic: undefined,
				allocation: 'code',
				measures: [{ column: 'y', name: 'Y', unit: '1', decimals: 0 }]
			})
		).rejects.toMatchObject({ code: 'MASKED_ALLOCATION' });
		await expect(
			mapImport(manager, studyId, batch.id, batch.version, {
				...orthodontMapping,
				visit: undefined,
				characteristic: { column: 'code', name: 'Arm' },
				measures: [{ column: 'y', name: 'Y', unit: '1', decimals: 0 }]
			})
		).rejects.toThrow(/looks like the allocation/);
		const [[kept]] = (await db.sql(
			`select count(*)::int as n from app.import_batch where study_id = '${studyId}'`
		)) as [[{ n: number }]];
		expect(kept.n).toBe(1);
	});
});

describe('permission', () => {
	test('a file of another study is not found, and no other role may import', async () => {
		const [mine, theirs] = [await importScene(db), await importScene(db)];
		const batch = await uploadImport(mine.manager, mine.studyId, {
			name: 'x.csv',
			bytes: Buffer.from(orthodontCsv())
		});
		await expect(getImport(theirs.manager, theirs.studyId, batch.id)).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
		const coordinator = await mine.person('statistician');
		await expect(previewImport(coordinator, mine.studyId, batch.id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const { rows, suggestion } = await previewImport(mine.manager, mine.studyId, batch.id);
		expect(rows[0]).toEqual(['M01', '1', '0', 'boy', '26.0']);
		expect(suggestion).toMatchObject({ subject: 'subject', characteristic: { column: 'sex' } });
	});
});
