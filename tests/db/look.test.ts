import { execFileSync } from 'node:child_process';
import { readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import { build } from '../../scripts/lib/build.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { findBoardRoom, recommend } from '../../src/lib/domain/board/board.server';
import { freezeCut } from '../../src/lib/domain/cut/cut.commands.server';
import { cancelJob } from '../../src/lib/domain/job/job.commands.server';
import { getJob } from '../../src/lib/domain/job/job.reads.server';
import { requestLook } from '../../src/lib/domain/look/look.commands.server';
import type { LookInput, LookSpec } from '../../src/lib/domain/look/look.input';
import { findLooks, getLook, type WholeLook } from '../../src/lib/domain/look/look.reads.server';
import { findPlan, signPlan } from '../../src/lib/domain/look/plan.server';
import {
	approveRelease,
	makeReport,
	releaseReport
} from '../../src/lib/domain/report/report.commands.server';
import { downloadCopy, readReportFile } from '../../src/lib/domain/report/report-file.server';
import { findReport } from '../../src/lib/domain/report/report.reads.server';
import type { Actor } from '../../src/lib/server/actor';
import { byArmLookJob, lookJob } from '../../src/lib/server/looks/jobs';
import {
	closedReleaseJob,
	closedReportJob,
	releaseJob,
	reportJob
} from '../../src/lib/server/looks/report-jobs';
import { plainDateOf } from '../../src/lib/time/dates';
import { forgetStorage } from '../../src/lib/server/storage/storage';
import { estimateCells } from '../../src/lib/report';
import {
	allocate,
	expectedFit,
	importFile,
	importScene,
	orthodontCsv,
	orthodontMapping,
	type ImportScene
} from '../support/analysis';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { useAs } from '../support/scene';

let db: FreshDatabase;
let end: () => Promise<void>;
beforeAll(async () => {
	await build({ ...testBuild, say: () => {}, web: false });
	db = await freshDatabase();
	useEnvironment(db, { CLI_DIR: join(root, testBuild.buildDir, 'cli') });
	forgetStorage();
	end = useAs(db.appUrl);
});
afterAll(async () => {
	await end?.();
	await db?.drop();
});

/** As the look worker, with its own role; then as the web server again. */
async function unmasked(work: () => Promise<void>): Promise<void> {
	await end();
	const over = useAs(db.unmaskedUrl);
	try {
		await work();
	} finally {
		await over();
		end = useAs(db.appUrl);
	}
}

const model: LookSpec = {
	measure: 'distance',
	timeUnit: 'as given',
	group: 'none',
	covariates: [],
	ownLevel: 'yes',
	method: 'REML',
	df: 'kenward-roger'
};

async function pooled(actor: Actor, studyId: string, input: LookInput): Promise<WholeLook> {
	const { id, jobRunId } = await requestLook(actor, studyId, input);
	await lookJob({ payload: { lookId: id, jobRunId }, lastTry: true }).catch(() => {});
	return (await getLook(actor, studyId, id)) as WholeLook;
}

function textOf(pdf: Buffer): string {
	const file = join(db.files, 'text.pdf');
	writeFileSync(file, pdf);
	return execFileSync('pdftotext', ['-layout', file, '-'], { encoding: 'utf8' });
}

describe('a pooled look', () => {
	let scene: ImportScene;
	let statistician: Actor;
	let cutId: string;
	beforeAll(async () => {
		scene = await importScene(db);
		statistician = await scene.person('statistician');
		await importFile(scene, orthodontCsv(), orthodontMapping);
		cutId = (await freezeCut(statistician, scene.studyId, { label: 'First', cutOffAt: '' })).id;
	});

	test('gives the reference estimates of the growth data of Potthoff and Roy (1964), by sex', async () => {
		const look = await pooled(statistician, scene.studyId, {
			cutId,
			...model,
			group: 'characteristic:sex'
		});
		expect(look).toMatchObject({
			status: 'done',
			kind: 'pooled',
			error: null,
			engineVersion: expect.stringMatching(/^heddle-stats /),
			inputHash: expect.stringMatching(/^[0-9a-f]{64}$/)
		});
		const expected = expectedFit('orthodont');
		const found = look.result?.growth;
		expect(found?.model.groupLevels).toEqual(['boy', 'girl']);
		for (const [name, theirs] of [
			['intercept', '(Intercept)'],
			['time', 'time'],
			['group[girl]', 'arm'],
			['time:group[girl]', 'time:arm']
		] as const) {
			const row = found?.coefficients.find((each) => each.name === name);
			expect(row?.estimate).toBeCloseTo(expected.beta[theirs] as number, 6);
			expect(row?.standardError).toBeCloseTo(expected.se[theirs] as number, 6);
			expect(row?.df).toBeCloseTo(expected.coef_tests[theirs]?.kr?.df as number, 3);
		}
		expect(found?.varianceComponents.map(({ estimate }) => estimate)).toEqual([
			expect.closeTo(expected.varcomp.tau2_intercept as number, 5),
			expect.closeTo(expected.varcomp.sigma2, 5)
		]);
	});

	test('asked again, it has the same input hash; another model has another', async () => {
		const ask = (spec: Partial<LookSpec>) =>
			pooled(statistician, scene.studyId, { cutId, ...model, ...spec });
		const [once, twice, other] = [
			await ask({}),
			await ask({}),
			await ask({ method: 'ML', df: 'satterthwaite' })
		];
		expect(twice.inputHash).toBe(once.inputHash);
		expect(other.inputHash).not.toBe(once.inputHash);
		expect(twice.result?.growth).toEqual(once.result?.growth);
	});

	test('that the data cannot answer says why, calmly, and keeps the question', async () => {
		const look = await pooled(statistician, scene.studyId, {
			cutId,
			...model,
			covariates: ['site']
		});
		expect(look.status).toBe('failed');
		expect(look.result).toBeNull();
		expect(look.error).toMatch(/site/i);
		expect(look.question).toBe('Estimate the yearly change in Distance.');
	});

	test('is refused beside the slot that names what is not there', async () => {
		const ask = (spec: Partial<LookSpec & { cutId: string }>) =>
			requestLook(statistician, scene.studyId, { cutId, ...model, ...spec });
		await expect(ask({ measure: 'weight' })).rejects.toMatchObject({
			fields: { measure: expect.any(String) }
		});
		await expect(ask({ group: 'characteristic:shoe' })).rejects.toMatchObject({
			fields: { group: expect.any(String) }
		});
		await expect(ask({ method: 'ML' })).rejects.toMatchObject({
			fields: { df: expect.any(String) }
		});
		await expect(
			ask({ group: 'characteristic:sex', covariates: ['characteristic:sex'] })
		).rejects.toMatchObject({ fields: { covariates: expect.any(String) } });
		const other = await importScene(db);
		const stranger = await other.person('statistician');
		await expect(requestLook(stranger, other.studyId, { cutId, ...model })).rejects.toMatchObject({
			code: 'NOT_PUBLISHED'
		});
	});

	test('that was cancelled before it began is cancelled, and has no result', async () => {
		const { id, jobRunId } = await requestLook(statistician, scene.studyId, { cutId, ...model });
		await cancelJob(statistician, jobRunId);
		await lookJob({ payload: { lookId: id, jobRunId }, lastTry: true });
		expect(await getLook(statistician, scene.studyId, id)).toMatchObject({
			status: 'cancelled',
			result: null
		});
		expect((await getJob(statistician, jobRunId)).status).toBe('cancelled');
	});

	test('an open report is released at once, stamped for each, and every download is written down', async () => {
		const look = await pooled(statistician, scene.studyId, {
			cutId,
			...model,
			group: 'characteristic:sex'
		});
		const [member, other] = [
			await scene.person('board_member'),
			await scene.person('board_member')
		];
		const { id, jobRunId } = await makeReport(statistician, scene.studyId, look.id);
		await expect(
			releaseReport(statistician, scene.studyId, id, { people: [member.personId] })
		).rejects.toMatchObject({ code: 'REPORT_NOT_READY' });
		await reportJob({ payload: { reportId: id, jobRunId }, lastTry: true });
		const made = await findReport(statistician, scene.studyId, look.id);
		const pdf = await readReportFile(statistician, scene.studyId, look.id);
		const file = join(db.files, 'pages.pdf');
		writeFileSync(file, pdf);
		const pages = Number(
			/Pages:\s+(\d+)/.exec(execFileSync('pdfinfo', [file], { encoding: 'utf8' }))?.[1]
		);
		expect(made.report).toMatchObject({ status: 'made', kind: 'open', pages });
		const text = textOf(pdf);
		const printed = estimateCells(
			look.result?.growth.coefficients.find(({ name }) => name === 'time:group[girl]') as never
		);
		expect(text).toContain(printed.estimate);
		expect(text).toContain('−0.305');
		// Everybody came by a file, and is counted together.
		expect(text).toContain('Participant flow');
		expect(text).toMatch(/Taken over from a file\s+27/);
		expect(text).not.toMatch(/Arm [A-Z]\b/);

		await expect(
			releaseReport(statistician, scene.studyId, id, { people: [scene.manager.personId] })
		).rejects.toMatchObject({ code: 'INVALID' });
		const { releases } = await releaseReport(statistician, scene.studyId, id, {
			people: [member.personId]
		});
		await expect(downloadCopy(member, scene.studyId, id)).rejects.toMatchObject({
			code: 'REPORT_NOT_READY'
		});
		for (const release of releases)
			await releaseJob({ payload: { releaseId: release.id }, lastTry: true });
		const copy = textOf(await downloadCopy(member, scene.studyId, id));
		expect(copy).toContain(`Copy for ${member.name}`);
		expect(copy).toContain('−0.305');
		await expect(downloadCopy(other, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_RELEASED'
		});
		await expect(downloadCopy(statistician, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const [downloads, mails, trail] = await db.sql(
			`select person_id from app.download where report_id = '${id}'`,
			`select person_id, kind from app.mail where study_id = '${scene.studyId}'`,
			`select actor from audit.event where record = 'download' and study_id = '${scene.studyId}'`
		);
		expect(downloads).toEqual([{ person_id: member.personId }]);
		expect(mails).toEqual([{ person_id: member.personId, kind: 'report-released' }]);
		expect(trail).toEqual([{ actor: member.personId }]);

		const advice = {
			reportId: id,
			advice: 'continue unchanged' as const,
			reason: 'Nothing stands against it.',
			meetingOn: plainDateOf('2026-01-15'),
			attendees: 'Two members'
		};
		await expect(recommend(other, scene.studyId, advice)).rejects.toMatchObject({
			code: 'NOT_RELEASED'
		});
		await recommend(member, scene.studyId, advice);
		expect((await findBoardRoom(member, scene.studyId)).packs).toHaveLength(1);
		expect(await findBoardRoom(other, scene.studyId)).toMatchObject({
			packs: [],
			recommendations: []
		});
		expect((await findBoardRoom(statistician, scene.studyId)).recommendations[0]).toMatchObject({
			advice: 'continue unchanged',
			recordedBy: member.name
		});
	});
});

describe('a look by arm', () => {
	let scene: ImportScene;
	let statistician: Actor;
	let independent: Actor;
	let cutId: string;
	const byArm: LookSpec = { ...model, group: 'arms' };
	beforeAll(async () => {
		scene = await importScene(db, { template: 'two-arm-trial', masked: true });
		statistician = await scene.person('statistician');
		independent = await scene.person('independent_statistician');
		const plain = orthodontCsv()
			.split('\n')
			.map((line) =>
				line
					.split(',')
					.filter((_, at) => at !== 3)
					.join(',')
			)
			.join('\n');
		await importFile(scene, plain, { ...orthodontMapping, characteristic: undefined });
		await allocate(db, scene.studyId, (subject) => (subject.startsWith('F') ? 'b' : 'a'));
		cutId = (await freezeCut(statistician, scene.studyId, { label: 'First', cutOffAt: '' })).id;
		await signPlan(statistician, scene.studyId, byArm);
	});

	const ask = async (spec: LookSpec) => {
		const asked = await requestLook(independent, scene.studyId, { cutId, ...spec });
		await unmasked(() =>
			byArmLookJob({
				payload: { lookId: asked.id, jobRunId: asked.jobRunId },
				lastTry: true
			}).catch(() => {})
		);
		return asked;
	};

	test('is the independent statistician’s alone, gives the reference estimates in letters, and each reading is written down', async () => {
		await expect(
			requestLook(statistician, scene.studyId, { cutId, ...byArm })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		const { id } = await ask(byArm);
		const look = (await getLook(independent, scene.studyId, id)) as WholeLook;
		expect(look).toMatchObject({ status: 'done', planned: true, kind: 'by arm' });
		const expected = expectedFit('orthodont');
		const row = look.result?.growth.coefficients.find(({ name }) => name === 'time:group[B]');
		expect(row?.estimate).toBeCloseTo(expected.beta['time:arm'] as number, 6);
		expect(row?.standardError).toBeCloseTo(expected.se['time:arm'] as number, 6);
		const [events] = await db.sql(
			`select actor, record from audit.event where record_id = '${id}' and action = 'act'`
		);
		expect(events).toEqual([{ actor: independent.personId, record: 'look_result' }]);
	});

	test('is for everyone else a number and nothing more, by every read, table and trail', async () => {
		const { id, jobRunId } = await ask(byArm);
		for (const actor of [statistician, scene.manager, await scene.person('auditor')]) {
			expect(await getLook(actor, scene.studyId, id)).toEqual({
				id,
				number: 2,
				kind: 'by arm',
				open: false
			});
			const listed = (await findLooks(actor, scene.studyId)).find((each) => each.id === id);
			expect(listed).toEqual({ id, number: 2, kind: 'by arm', open: false });
		}
		const [open, job, trail] = await db.sql(
			`select spec, result, input_hash, error from app.look where id = '${id}'`,
			`select title, message, error, result from app.job_run where id = '${jobRunId}'`,
			`select coalesce(before::text, '') || coalesce(after::text, '') as held from audit.event where study_id = '${scene.studyId}' and record in ('look', 'look_result', 'look_request', 'job_run', 'report', 'release')`
		);
		expect(open).toEqual([{ spec: null, result: null, input_hash: null, error: null }]);
		expect(job).toEqual([{ title: 'Look 2', message: 'Done.', error: null, result: null }]);
		for (const { held } of trail as { held: string }[])
			expect(held).not.toMatch(/coefficients|"arms"|group\[|\[B\]|slope/);
		// The application's own role reads nothing of it, whoever asks.
		for (const table of [
			'look_result',
			'look_request',
			'cut_allocation',
			'list_position',
			'arm_letter',
			'closed_report',
			'released_copy',
			'event'
		])
			await expect(db.sql(`set role heddle_app`, `select * from closed.${table}`)).rejects.toThrow(
				/permission denied/
			);
	});

	test('with any other model than the plan’s it is counted, kept and marked as not planned', async () => {
		const { id } = await ask({ ...byArm, method: 'ML', df: 'satterthwaite' });
		expect(await getLook(independent, scene.studyId, id)).toMatchObject({
			number: 3,
			planned: false
		});
	});

	test('that cannot be made says why to its reader only', async () => {
		const { id, jobRunId } = await ask({ ...byArm, covariates: ['site'] });
		const look = (await getLook(independent, scene.studyId, id)) as WholeLook;
		expect(look.status).toBe('failed');
		expect(look.error).toMatch(/site/i);
		const [open] = await db.sql(
			`select l.error as look, j.error as job from app.look l join app.job_run j on j.id = l.job_run_id where j.id = '${jobRunId}'`
		);
		expect(open).toEqual([
			{
				look: 'The look could not be made. The independent statistician can read why.',
				job: 'The look could not be made. The independent statistician can read why.'
			}
		]);
	});

	test('the plan is signed once and does not change', async () => {
		await expect(signPlan(statistician, scene.studyId, model)).rejects.toMatchObject({
			code: 'PLAN_EXISTS'
		});
		await expect(signPlan(independent, scene.studyId, model)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		expect(await findPlan(scene.manager, scene.studyId)).toMatchObject({
			words: expect.stringMatching(/^Compare the yearly change in Distance between the arms/),
			signedBy: statistician.name
		});
	});

	test('R-71: a closed report holds letters, never the arms’ names, in its text, its outline and its particulars', async () => {
		const { id } = await ask({ ...byArm, method: 'ML', df: 'naive' });
		await expect(makeReport(statistician, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const { id: reportId, jobRunId } = await makeReport(independent, scene.studyId, id);
		await unmasked(() => closedReportJob({ payload: { reportId, jobRunId }, lastTry: true }));
		await expect(readReportFile(statistician, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const pdf = await readReportFile(independent, scene.studyId, id);
		const text = textOf(pdf);
		expect(text).toContain('Arm A');
		expect(text).toContain('NOT PLANNED');
		// The flow at the cut-off, by letter.
		const allocated = (await db.sql(
			`select count(*) filter (where arm_key = 'a')::int as a, count(*) filter (where arm_key = 'b')::int as b
			from closed.list_position where study_id = '${scene.studyId}' and subject_id is not null`
		)) as [[{ a: number; b: number }]];
		const [[{ a, b }]] = allocated;
		expect(text).toMatch(/People\s+Arm A\s+Arm B/);
		expect(text).toMatch(new RegExp(`Randomised\\s+${a}\\s+${b}\\b`));
		const file = join(db.files, 'closed.pdf');
		writeFileSync(file, pdf);
		const whole = execFileSync('qpdf', ['--qdf', '--object-streams=disable', file, '-'], {
			maxBuffer: 64 * 1024 * 1024
		}).toString('latin1');
		const [[version]] = (await db.sql(
			`select definition -> 'arms' as arms from app.protocol_version where study_id = '${scene.studyId}'`
		)) as [[{ arms: { key: string; name: string }[] }]];
		for (const { name } of version.arms)
			for (const held of [text, whole]) expect(held).not.toContain(name);

		// What lies in the closed area is ciphertext, of a size that is the same for many reports.
		const [[kept]] = (await db.sql(
			`select storage_key from closed.closed_report where report_id = '${reportId}'`
		)) as [[{ storage_key: string }]];
		const sealed = readFileSync(join(db.files, 'closed', kept.storage_key));
		// Long enough that chance does not write it into random bytes.
		expect(sealed.includes('%PDF-1.')).toBe(false);
		expect((sealed.length - 28) % (64 * 1024)).toBe(0);
	});

	test('a closed report goes out by two people: the one who asks does not approve', async () => {
		const { id } = await ask({ ...byArm, method: 'ML', df: 'naive' });
		const { id: reportId, jobRunId } = await makeReport(independent, scene.studyId, id);
		await unmasked(() => closedReportJob({ payload: { reportId, jobRunId }, lastTry: true }));
		const [member, other] = [
			await scene.person('board_member'),
			await scene.person('board_member')
		];
		await expect(
			releaseReport(statistician, scene.studyId, reportId, { people: [member.personId] })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		const { releases } = await releaseReport(independent, scene.studyId, reportId, {
			people: [member.personId]
		});
		const releaseId = releases[0]?.id as string;
		expect(releases[0]?.status).toBe('asked');
		expect((await findBoardRoom(member, scene.studyId)).packs).toEqual([]);
		await expect(approveRelease(independent, scene.studyId, releaseId)).rejects.toMatchObject({
			code: 'SECOND_PERSON'
		});
		await expect(approveRelease(statistician, scene.studyId, releaseId)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		await approveRelease(scene.manager, scene.studyId, releaseId);
		await expect(downloadCopy(member, scene.studyId, reportId)).rejects.toMatchObject({
			code: 'REPORT_NOT_READY'
		});
		await unmasked(() => closedReleaseJob({ payload: { releaseId }, lastTry: true }));
		const copy = textOf(await downloadCopy(member, scene.studyId, reportId));
		expect(copy).toContain(`Copy for ${member.name}`);
		for (const stranger of [other, independent, scene.manager])
			await expect(downloadCopy(stranger, scene.studyId, reportId)).rejects.toMatchObject({
				code: expect.stringMatching(/NOT_RELEASED|NOT_PERMITTED/)
			});
	});
});
