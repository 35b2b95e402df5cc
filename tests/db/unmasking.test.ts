import { inflateSync } from 'node:zlib';
import pg from 'pg';
import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import { getSubjectRecord } from '../../src/lib/domain/subject/record.reads.server';
import { randomiseSubject } from '../../src/lib/domain/subject/subject.commands.server';
import { codeLetters, codeText, readCode } from '../../src/lib/domain/unmasking/code';
import {
	askForCodes,
	readCodeSheets,
	sealedCodesJob
} from '../../src/lib/domain/unmasking/codes.server';
import { hashOfCode, newCode } from '../../src/lib/domain/unmasking/code.server';
import {
	recordUnmasking,
	unmaskSubject
} from '../../src/lib/domain/unmasking/unmasking.commands.server';
import {
	findRecentUnmaskings,
	findUnmaskings
} from '../../src/lib/domain/unmasking/unmasking.reads.server';
import type { Actor } from '../../src/lib/server/actor';
import { hashPassword } from '../../src/lib/server/auth/password';
import { startSession } from '../../src/lib/server/auth/session';
import { closedConfig, config, readClosedConfig, readConfig } from '../../src/lib/server/config';
import { mailContent } from '../../src/lib/server/mail/content';
import { newId } from '../../src/lib/id';
import { clock } from '../../src/lib/time/clock';
import { sceneOf } from '../support/allocation-scene';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { asOwner } from '../support/people';
import { enrolOne, makeList, makeScene, useAs, type Scene } from '../support/scene';

const password = 'linen warp and weft';
let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
let investigator: Actor;
let subject: { id: string; number: string };
let kit: string;
let arm: string;

const signedIn = async (actor: Actor): Promise<Actor> => ({
	...actor,
	sessionId: await startSession(
		{ id: actor.personId, name: actor.name, email: actor.email },
		'password',
		'test',
		'test'
	)
});
const asked = (change: object = {}) => ({
	reason: 'Unconscious, cause unknown.',
	email: investigator.email,
	password,
	...change
});

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	Object.assign(config(), readConfig(process.env));
	Object.assign(closedConfig(), readClosedConfig(process.env));
	end = useAs(db.appUrl);
	await db.sql('update app.installation set clock_may_move = true');
	clock.set('2026-03-10T12:00:00Z');
	scene = await makeScene(db, { plannedSubjects: 40 });
	await end();
	end = useAs(db.appUrl);
	await makeList(db, scene);
	end = useAs(db.appUrl);
	const hash = await hashPassword(password);
	await asOwner(db, (client) =>
		client.query('update app.person set password_hash = $1 where id = $2', [
			hash,
			scene.investigator.personId
		])
	);
	investigator = await signedIn(scene.investigator);
	subject = await enrolOne(scene);
	kit = (await randomiseSubject(scene.coordinator, scene.studyId, subject.id)).kitNumber;
	const [[place]] = (await db.sql(
		`select arm_key from closed.list_position where subject_id = '${subject.id}'`
	)) as [{ arm_key: 'a' | 'b' }[]];
	arm = { a: 'Treatment A', b: 'Treatment B' }[place!.arm_key];
});
beforeEach(() => db.sql('delete from app.rate_limit'));
afterAll(async () => {
	clock.reset();
	await end?.();
	await db?.drop();
});

describe('emergency unmasking', () => {
	test('R-49: is for the investigator of the site alone, and not before there is an allocation', async () => {
		for (const [actor, code] of [
			[scene.coordinator, 'NOT_PERMITTED'],
			[scene.nurse, 'NOT_PERMITTED'],
			[scene.manager, 'NOT_PERMITTED'],
			[scene.independent, 'NOT_PERMITTED'],
			[await scene.person('investigator', scene.sites[1]?.id), 'NOT_FOUND']
		] as const)
			await expect(unmaskSubject(actor, scene.studyId, subject.id, asked())).rejects.toMatchObject({
				code
			});
		const bare = await enrolOne(scene);
		await expect(
			unmaskSubject(investigator, scene.studyId, bare.id, asked())
		).rejects.toMatchObject({ code: 'NOTHING_MASKED' });
		const open = await sceneOf(db, { plannedSubjects: 8, masked: false });
		await makeList(db, open);
		end = useAs(db.appUrl);
		const shown = await enrolOne(open);
		await randomiseSubject(open.coordinator, open.studyId, shown.id);
		await expect(
			unmaskSubject(open.investigator, open.studyId, shown.id, asked())
		).rejects.toMatchObject({ code: 'NOTHING_MASKED' });
		expect((await db.sql('select id from app.unmasking'))[0]).toEqual([]);
	});

	test('asks who it is and why; a wrong password shows nothing and is on record', async () => {
		await expect(
			unmaskSubject(investigator, scene.studyId, subject.id, asked({ password: 'something else' }))
		).rejects.toMatchObject({ code: 'UNMASK_SECRET', fields: { password: expect.any(String) } });
		await expect(
			unmaskSubject(investigator, scene.studyId, subject.id, asked({ email: '' }))
		).rejects.toMatchObject({ code: 'INVALID', fields: { email: expect.any(String) } });
		await expect(
			unmaskSubject(
				investigator,
				scene.studyId,
				subject.id,
				asked({ reason: 'I think it is treatment a.' })
			)
		).rejects.toMatchObject({ code: 'INVALID', fields: { reason: expect.any(String) } });
		const [none, shown, refused] = await db.sql(
			'select id from app.unmasking',
			'select 1 from closed.shown_arm',
			`select after from audit.event where action = 'refused' and actor = '${investigator.personId}' order by id desc limit 1`
		);
		expect([none, shown]).toEqual([[], []]);
		expect(refused?.[0].after).toEqual({ code: 'SIGNING_SECRET' });
	});

	test('shows the arm to who asked; everybody else learns that it happened, by mail, on Today, in the record and the log', async () => {
		const answer = await unmaskSubject(investigator, scene.studyId, subject.id, asked());
		expect(answer).toMatchObject({ arm, subject: subject.number });
		const [[row] = [], [shown] = [], closed, mails, open] = await db.sql(
			`select * from app.unmasking`,
			`select arm_key, subject_id from closed.shown_arm`,
			`select c.after from closed.event c join audit.event e on e.id = c.event_id where e.record = 'shown_arm'`,
			`select p.id as person, m.kind, m.subject_id, m.facts from app.mail m join app.person p on p.id = m.person_id where m.kind = 'unmasking' and p.id = any ('{${[investigator, scene.manager, scene.independent, scene.coordinator, scene.nurse, scene.other].map((each) => each.personId)}}')`,
			`select coalesce(before::text, '') || coalesce(after::text, '') || coalesce(reason, '') as said from audit.event where study_id = '${scene.studyId}' and record <> 'protocol_version'`
		);
		expect(row).toMatchObject({
			kind: 'emergency',
			subject_id: subject.id,
			person_id: investigator.personId,
			known_to: investigator.name,
			reason: 'Unconscious, cause unknown.'
		});
		expect(shown?.subject_id).toBe(subject.id);
		expect(closed?.[0].after.arm_key).toBe(shown?.arm_key);
		expect(open?.some((each) => /Treatment [AB]|"arm_key": "/.test(each.said))).toBe(false);
		expect(mails?.map((mail) => mail.person).sort()).toEqual(
			[investigator, scene.manager, scene.independent].map((each) => each.personId).sort()
		);
		expect(
			mails?.every((mail) => mail.subject_id === null && JSON.stringify(mail.facts) === '{}')
		).toBe(true);
		for (const actor of [scene.manager, scene.independent, investigator])
			expect(await findRecentUnmaskings(actor, scene.studyId)).toMatchObject([
				{ subject: subject.number, knownTo: investigator.name }
			]);
		const auditor = await scene.person('auditor');
		const log = await findUnmaskings(auditor, scene.studyId);
		expect(log.items).toHaveLength(1);
		expect(log.unmasked.map((each) => each.name)).toContain(scene.independent.name);
		const record = await getSubjectRecord(scene.nurse, scene.studyId, subject.id);
		const item = record.items.find((each) => each.kind === 'unmasking');
		expect(item?.lines.join(' ')).toContain('Unconscious, cause unknown.');
		expect(JSON.stringify([log, record])).not.toMatch(/Treatment [AB]|"arm_key"/);
		// Another site's people see nothing of it.
		const elsewhere = await scene.person('monitor', scene.sites[1]?.id);
		expect((await findUnmaskings(elsewhere, scene.studyId)).items).toEqual([]);
	});

	test('its mail holds neither study nor subject nor arm', async () => {
		const client = useAs(db.appUrl);
		const { readOwn } = await import('../../src/lib/server/change');
		const [[study]] = (await db.sql(
			`select code, name from app.study where id = '${scene.studyId}'`
		)) as [{ code: string; name: string }[]];
		await readOwn(scene.manager, async (reader) => {
			const mail = await reader
				.selectFrom('mail')
				.selectAll()
				.where('kind', '=', 'unmasking')
				.where('person_id', '=', scene.manager.personId)
				.executeTakeFirstOrThrow();
			const content = await mailContent.unmasking!(mail as never, reader);
			const text = `${content?.subject} ${content?.text} ${content?.html}`;
			for (const word of [
				study!.code,
				study!.name,
				subject.number,
				kit,
				'Treatment',
				scene.studyId
			])
				expect(text).not.toContain(word);
			expect(content?.to).toBe(scene.manager.email);
		});
		await client();
		end = useAs(db.appUrl);
	});

	test('is throttled, and the record of it can be neither altered nor removed nor made by hand', async () => {
		for (let n = 0; n < 6; n++)
			await unmaskSubject(investigator, scene.studyId, subject.id, asked());
		await expect(
			unmaskSubject(investigator, scene.studyId, subject.id, asked())
		).rejects.toMatchObject({ code: 'THROTTLED' });
		await expect(
			asOwner(db, (client) => client.query(`update app.unmasking set reason = 'x'`))
		).rejects.toMatchObject({ code: 'HD002' });
		await expect(
			asOwner(db, (client) => client.query('delete from app.unmasking'))
		).rejects.toMatchObject({ code: 'HD002' });
		const client = new pg.Client({ connectionString: db.appUrl });
		await client.connect();
		await client.query('begin');
		await client.query(`select app.enter($1, 'investigator', 'test', '', null)`, [
			investigator.personId
		]);
		await expect(
			client.query(
				`insert into app.unmasking (id, study_id, site_id, subject_id, kind, person_id, known_to, happened_at, reason)
				values ($1, $2, $3, $4, 'emergency', $5, 'Me', '2026-01-01', 'None')`,
				[newId(), scene.studyId, scene.sites[0]?.id, subject.id, investigator.personId]
			)
		).rejects.toMatchObject({ code: 'HD006' });
		await client.end();
	});
});

describe('sealed codes', () => {
	let code: string;
	let printId: string;

	/** The text of a PDF of ours: its streams unpacked; letters are glyphs, so that only structure can be read. */
	const streams = (pdf: Buffer) =>
		[...pdf.toString('latin1').matchAll(/stream\r?\n([\s\S]*?)endstream/g)].map((match) => {
			try {
				return inflateSync(Buffer.from(match[1] as string, 'latin1')).length;
			} catch {
				return 0;
			}
		});

	test('R-36: are printed by the independent statistician alone, one sheet for each kit, and once', async () => {
		const siteId = scene.sites[0]?.id as string;
		for (const actor of [scene.manager, scene.coordinator, scene.investigator])
			await expect(askForCodes(actor, scene.studyId, siteId)).rejects.toMatchObject({
				code: 'NOT_PERMITTED'
			});
		const made = await askForCodes(scene.independent, scene.studyId, siteId);
		printId = made.id;
		const work = async (print: { id: string; jobRunId: string }) => {
			await end();
			const look = useAs(db.unmaskedUrl);
			try {
				await sealedCodesJob({
					payload: { printId: print.id, jobRunId: print.jobRunId },
					lastTry: true
				});
			} finally {
				await look();
				end = useAs(db.appUrl);
			}
		};
		await work(made);
		const pdf = await readCodeSheets(scene.independent, scene.studyId, printId);
		expect(pdf.subarray(0, 5).toString()).toBe('%PDF-');
		expect(pdf.toString('latin1').match(/\/Type \/Page\b(?!s)/g)).toHaveLength(1);
		expect(streams(pdf).some((length) => length > 500)).toBe(true);
		await expect(readCodeSheets(scene.coordinator, scene.studyId, printId)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
		const [codes, read] = await db.sql(
			`select kit_number from closed.sealed_code`,
			`select actor from audit.event where record = 'code_print' and action = 'act'`
		);
		expect(codes).toEqual([{ kit_number: kit }]);
		expect(read).toEqual([{ actor: scene.independent.personId }]);
		const again = await askForCodes(scene.independent, scene.studyId, siteId);
		await expect(work(again)).rejects.toMatchObject({ code: 'CONFLICT' });
		const [[failed]] = (await db.sql(
			`select status from app.code_print where id = '${again.id}'`
		)) as [{ status: string }[]];
		expect(failed?.status).toBe('failed');
		// What stands on the sheet is nowhere else: the test takes a code of its own in its place.
		code = newCode();
		await db.sql(
			`set session_replication_role = replica`,
			`update closed.sealed_code set code_hash = '${hashOfCode(scene.studyId, kit, code)}'`
		);
	});

	test('are read as people write them', () => {
		expect(readCode(codeText(code).toLowerCase())).toBe(code);
		expect(readCode(` ${code.slice(0, 3)} ${code.slice(3)}`)).toBe(code);
		for (const wrong of ['', code.slice(1), `${code}2`, `${code.slice(0, 9)}O`, '0123456789'])
			expect(readCode(wrong)).toBeNull();
		expect(new Set(codeLetters).size).toBe(30);
	});

	test('one that was opened is entered afterwards with both times, and taken once', async () => {
		const told = {
			kind: 'sealed code' as const,
			code: codeText(code),
			knownTo: 'Dr Ida Reyes, on call',
			happenedOn: '2026-03-09',
			happenedTime: '23:40',
			reason: 'Heddle could not be reached.',
			impact: ''
		};
		for (const wrong of ['', 'ABC', codeText(newCode())])
			await expect(
				recordUnmasking(scene.coordinator, scene.studyId, subject.id, { ...told, code: wrong })
			).rejects.toMatchObject({ code: expect.stringMatching(/INVALID|CODE_UNKNOWN/) });
		await expect(
			recordUnmasking(scene.coordinator, scene.studyId, subject.id, {
				...told,
				happenedOn: '2026-03-11'
			})
		).rejects.toMatchObject({ code: 'FUTURE' });
		await expect(
			recordUnmasking(scene.coordinator, scene.studyId, subject.id, {
				...told,
				reason: 'They had Treatment B.'
			})
		).rejects.toMatchObject({ code: 'INVALID' });
		const { unmaskingId } = await recordUnmasking(
			scene.coordinator,
			scene.studyId,
			subject.id,
			told
		);
		const [[row] = [], [used] = []] = await db.sql(
			`select kind, known_to, happened_at, recorded_at from app.unmasking where id = '${unmaskingId}'`,
			`select used_at, unmasking_id from closed.sealed_code where kit_number = '${kit}'`
		);
		expect(row).toMatchObject({ kind: 'sealed code', known_to: 'Dr Ida Reyes, on call' });
		expect(row?.happened_at.toISOString()).toBe('2026-03-09T23:40:00.000Z');
		expect(row?.recorded_at.toISOString()).toBe('2026-03-10T12:00:00.000Z');
		expect(used?.unmasking_id).toBe(unmaskingId);
		expect(used?.used_at).not.toBeNull();
		await expect(
			recordUnmasking(scene.coordinator, scene.studyId, subject.id, told)
		).rejects.toMatchObject({ code: 'CODE_USED' });
	});

	test('R-50: an accident is recorded with who knows, and what it may have touched', async () => {
		await recordUnmasking(investigator, scene.studyId, subject.id, {
			kind: 'accidental',
			code: '',
			knownTo: 'The ward’s pharmacist',
			happenedOn: '2026-03-10',
			happenedTime: '08:00',
			reason: 'A delivery note lay open.',
			impact: 'Nobody who assesses saw it.'
		});
		const { items } = await findUnmaskings(scene.manager, scene.studyId);
		expect(items[0]).toMatchObject({
			kind: 'By accident',
			impact: 'Nobody who assesses saw it.'
		});
	});
});
