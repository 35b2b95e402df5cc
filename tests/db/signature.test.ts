import { spawnSync } from 'node:child_process';
import { join } from 'node:path';
import { afterAll, beforeAll, beforeEach, describe, expect, test } from 'vitest';
import pg from 'pg';
import { environmentFor } from '../../scripts/lib/environment.mjs';
import { root } from '../../scripts/lib/places.mjs';
import { testBuild } from '../../scripts/lib/test-cluster.mjs';
import { canonical } from '../../src/lib/domain/cut/canonical';
import { fingerprintNow } from '../../src/lib/domain/cut/fingerprint.server';
import { requestReset, setPasswordByLink } from '../../src/lib/domain/person/link.commands.server';
import {
	inviteAgain,
	invitePerson,
	setActive
} from '../../src/lib/domain/person/person.commands.server';
import { sign } from '../../src/lib/domain/signature/signature.commands.server';
import { findWaiting, getSignature } from '../../src/lib/domain/signature/signature.reads.server';
import type { SignItem } from '../../src/lib/domain/signature/signature.input';
import { verifySignatures } from '../../src/lib/domain/signature/verify.server';
import {
	addScreening,
	answerEligibility,
	closeScreening
} from '../../src/lib/domain/subject/screening.commands.server';
import { recordConsent } from '../../src/lib/domain/consent/consent.commands.server';
import { getScreening } from '../../src/lib/domain/subject/screening.reads.server';
import {
	enrolSubject,
	randomiseSubject
} from '../../src/lib/domain/subject/subject.commands.server';
import { systemActor, type Actor } from '../../src/lib/server/actor';
import { actorFor } from '../../src/lib/server/auth/actor';
import { hashPassword } from '../../src/lib/server/auth/password';
import {
	endSession,
	lockSession,
	startSession,
	unlockSession
} from '../../src/lib/server/auth/session';
import { unwrap } from '../../src/lib/server/secret';
import { newId } from '../../src/lib/id';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson, addRole, asOwner } from '../support/people';
import {
	consentOn,
	makeList,
	makeScene,
	metAnswers,
	particulars,
	useAs,
	type Scene
} from '../support/scene';

const password = 'linen warp and weft';
let db: FreshDatabase;
let end: () => Promise<void>;
let scene: Scene;
let passwordHash: string;

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db);
	end = useAs(db.appUrl);
	passwordHash = await hashPassword(password);
	scene = await makeScene(db);
});
beforeEach(() => db.sql('delete from app.rate_limit'));
afterAll(async () => {
	await end?.();
	await db?.drop();
});

const begin = async (actor: Actor): Promise<Actor> => ({
	...actor,
	sessionId: await startSession(
		{ id: actor.personId, name: actor.name, email: actor.email },
		'password',
		'a browser',
		newId()
	)
});

/** An investigator with a password, signed in; of the first site unless another is named. */
async function investigator(in_ = scene, siteId = in_.sites[0]?.id as string): Promise<Actor> {
	const id = await addPerson(db, {
		email: `investigator-${newId()}@example.org`,
		name: 'Dr Celia Roon',
		passwordHash
	});
	await addRole(db, id, 'investigator', in_.studyId, siteId);
	return begin(await actorFor(id, 'test'));
}

/** A screening whose every criterion is answered and met. */
async function answered(in_ = scene): Promise<{ id: string; version: number }> {
	const made = await addScreening(in_.coordinator, in_.studyId, {
		siteId: in_.sites[0]?.id as string,
		screenedOn: '2026-03-02'
	});
	const { version } = await answerEligibility(
		in_.coordinator,
		in_.studyId,
		made.id,
		{ answers: await metAnswers(in_) },
		made.version
	);
	return { id: made.id, version };
}

async function itemOf(actor: Actor, recordId: string, in_ = scene): Promise<SignItem> {
	const only = { record: 'eligibility' as const, recordId };
	const { items } = await findWaiting(actor, in_.studyId, only);
	if (!items[0]) throw new Error('It does not wait.');
	const { record, meaning, sha256 } = items[0];
	return { record, recordId, meaning, sha256 };
}

const signOne = async (actor: Actor, recordId: string, in_ = scene) => {
	const item = await itemOf(actor, recordId, in_);
	const { signatures } = await sign(actor, in_.studyId, {
		items: [item],
		email: actor.email,
		password
	});
	return signatures[0]?.id as string;
};

const count = async () => (await db.sql('select count(*)::int as n from app.signature'))[0]?.[0].n;
const signaturesOn = async (actor: Actor, screeningId: string, in_ = scene) =>
	(await getScreening(actor, in_.studyId, screeningId)).signatures;

/** Answers one criterion the other way. */
async function turn(screening: { id: string; version: number }, back = false) {
	const met = await metAnswers(scene);
	const [key = ''] = Object.keys(met);
	const other = { ...met, [key]: met[key] === 'yes' ? ('no' as const) : ('yes' as const) };
	return answerEligibility(
		scene.coordinator,
		scene.studyId,
		screening.id,
		{ answers: back ? met : other },
		screening.version
	);
}

/** What `npx heddle verify-signatures` prints last, and its status. */
function command(): { status: number | null; last: string | undefined } {
	const { status, stdout } = spawnSync(
		process.execPath,
		[join(root, testBuild.buildDir, 'cli/admin.js'), 'verify-signatures'],
		{
			encoding: 'utf8',
			env: environmentFor('admin', { ...db.env, ORIGIN: 'http://127.0.0.1:1' })
		}
	);
	return { status, last: stdout.trim().split('\n').at(-1) };
}

/** As somebody who has the superuser's power and puts every trigger out of action. */
const tamper = (statement: string) =>
	db.sql(`set session_replication_role = replica; ${statement}`);

describe('a signature', () => {
	test('keeps the printed name, the role, the meaning, the instant in the site’s zone and exactly what was shown', async () => {
		const actor = await investigator();
		const screening = await answered();
		const waiting = await findWaiting(actor, scene.studyId);
		const shown = waiting.items.find((item) => item.recordId === screening.id);
		expect(shown?.statement).toBe('I have checked the eligibility of this person and confirm it.');
		const id = await signOne(actor, screening.id);
		const [[row] = [], events] = await db.sql(
			`select *, at > now() - interval '1 minute' as recent from app.signature where id = '${id}'`,
			`select actor, role, action, after from audit.event where record = 'signature' and record_id = '${id}'`
		);
		expect(row).toMatchObject({
			signer_id: actor.personId,
			printed_name: 'Dr Celia Roon',
			role: 'investigator',
			meaning: 'eligibility',
			statement: 'I have checked the eligibility of this person and confirm it.',
			zone: 'Europe/London',
			recent: true,
			record_id: screening.id,
			sha256: shown?.sha256
		});
		expect(fingerprintNow(row.content)).toBe(shown?.sha256);
		expect(canonical(JSON.parse(row.content))).toBe(row.content);
		expect(
			JSON.parse(row.content).lines.map(({ key: _, ...line }: { key: string }) => line)
		).toEqual(shown?.lines);
		expect(events).toHaveLength(1);
		expect(events?.[0]).toMatchObject({
			actor: actor.personId,
			role: 'investigator',
			action: 'create',
			after: { printed_name: 'Dr Celia Roon', content: row.content }
		});
		const detail = await getSignature(scene.manager, scene.studyId, id);
		expect(detail).toMatchObject({ name: 'Dr Celia Roon', standing: 'stands', differences: [] });
		expect(detail.when).toMatch(/Europe\/London \([+−]\d\d:\d\d\)$/);
		expect(detail.lines).toEqual(shown?.lines);
	});

	test('is altered and removed by nobody: neither the application nor the owner', async () => {
		const id = await signOne(await investigator(), (await answered()).id);
		for (const url of [db.appUrl, db.ownerUrl, db.unmaskedUrl])
			for (const statement of [
				`update app.signature set printed_name = 'Another' where id = '${id}'`,
				`delete from app.signature where id = '${id}'`,
				'truncate app.signature',
				'alter table app.signature disable trigger user'
			]) {
				if (url === db.ownerUrl && statement.startsWith('alter')) continue;
				const client = new pg.Client({ connectionString: url });
				await client.connect();
				try {
					await client.query('begin');
					await client.query(
						`select app.enter('00000000-0000-7000-8000-000000000001', 'system', 'test', '', null)`
					);
					await expect(client.query(statement)).rejects.toMatchObject({
						code: expect.stringMatching(/^(42501|HD002)$/)
					});
				} finally {
					await client.end();
				}
			}
		const [rows] = await db.sql(`select printed_name from app.signature where id = '${id}'`);
		expect(rows).toEqual([{ printed_name: 'Dr Celia Roon' }]);
	});

	test('is given by who holds the role at the site, and found by who may read there', async () => {
		const screening = await answered();
		const item = await itemOf(await investigator(), screening.id);
		const before = await count();
		const secrets = { password, email: '' };
		const elsewhere = await investigator(scene, scene.sites[1]?.id);
		await expect(
			sign(elsewhere, scene.studyId, { items: [item], ...secrets, email: elsewhere.email })
		).rejects.toMatchObject({ code: 'NOT_FOUND' });
		const coordinator = await begin(scene.coordinator);
		await expect(
			sign(coordinator, scene.studyId, { items: [item], ...secrets })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		expect(await count()).toBe(before);
		const id = await signOne(await investigator(), screening.id);
		await expect(getSignature(scene.other, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
		await expect(getSignature(scene.nurse, scene.studyId, id)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
	});

	test('is not given twice while it stands, nor to what is unanswered, unmet or closed', async () => {
		const actor = await investigator();
		const screening = await answered();
		const item = await itemOf(actor, screening.id);
		await signOne(actor, screening.id);
		await expect(sign(actor, scene.studyId, { items: [item], password })).rejects.toMatchObject({
			code: 'SIGNED_ALREADY'
		});
		const unmet = await answered();
		await turn(unmet);
		const closed = await answered();
		await closeScreening(scene.coordinator, scene.studyId, closed.id, 'Moved.', closed.version);
		for (const { id } of [unmet, closed])
			await expect(itemOf(actor, id)).rejects.toThrow('It does not wait.');
		await expect(
			sign(actor, scene.studyId, {
				items: [{ ...item, recordId: closed.id }],
				password
			})
		).rejects.toMatchObject({ code: 'SHOWN_CHANGED' });
	});
});

describe('what was shown is what is signed', () => {
	test('a record that changed after it was shown is refused, with every other record of the batch', async () => {
		const actor = await investigator();
		const [first, second] = [await answered(), await answered()];
		const items = [await itemOf(actor, first.id), await itemOf(actor, second.id)];
		await turn(second);
		const before = await count();
		await expect(
			sign(actor, scene.studyId, { items, email: actor.email, password })
		).rejects.toMatchObject({ code: 'SHOWN_CHANGED', status: 409 });
		expect(await count()).toBe(before);
	});

	test('a batch makes one signature for each record', async () => {
		const actor = await investigator();
		const records = [await answered(), await answered(), await answered()];
		const items = await Promise.all(records.map(({ id }) => itemOf(actor, id)));
		const before = await count();
		await sign(actor, scene.studyId, { items, email: actor.email, password });
		expect(await count()).toBe(before + 3);
		await expect(
			sign(actor, scene.studyId, { items: [items[0], items[0]] as SignItem[], password })
		).rejects.toMatchObject({ code: 'INVALID' });
	});

	test('two who sign the same record at the same moment make one signature', async () => {
		const screening = await answered();
		const both = [await investigator(), await investigator()];
		const items = await Promise.all(both.map((actor) => itemOf(actor, screening.id)));
		const told = await Promise.allSettled(
			both.map((actor, at) =>
				sign(actor, scene.studyId, {
					items: [items[at] as SignItem],
					email: actor.email,
					password
				})
			)
		);
		expect(told.map((each) => each.status).sort()).toEqual(['fulfilled', 'rejected']);
		expect(told.find((each) => each.status === 'rejected')).toMatchObject({
			reason: { code: 'SIGNED_ALREADY' }
		});
	});
});

describe('R-14: a signature is tied to what was signed', () => {
	test('R-14: a later change of the record breaks it visibly and asks for a new one; the old one stays readable', async () => {
		const actor = await investigator();
		const screening = await answered();
		const id = await signOne(actor, screening.id);
		expect(await signaturesOn(actor, screening.id)).toMatchObject([{ standing: 'stands' }]);
		await expect(itemOf(actor, screening.id)).rejects.toThrow('It does not wait.');

		const turned = await turn(screening);
		const [broken] = await signaturesOn(scene.manager, screening.id);
		expect(broken).toMatchObject({
			id,
			standing: 'broken',
			broken: { by: scene.coordinator.name, when: expect.stringContaining('Europe/London') }
		});
		const detail = await getSignature(actor, scene.studyId, id);
		expect(detail.differences).toHaveLength(2);
		expect(detail.differences[0]).toMatchObject({ label: 'Answered at' });
		expect(detail.differences[1]).toMatchObject({
			before: expect.stringContaining(': met'),
			after: expect.stringContaining(': not met')
		});
		expect(detail.lines.every(({ value }) => !value.includes('not met'))).toBe(true);

		// The answers as they were are answers given anew: they wait for a signature of their own.
		await expect(itemOf(actor, screening.id)).rejects.toThrow('It does not wait.');
		const back = await turn({ id: screening.id, version: turned.version }, true);
		const waiting = await findWaiting(actor, scene.studyId);
		expect(waiting.items.find((item) => item.recordId === screening.id)?.broken).toMatchObject({
			id,
			broken: { at: broken?.broken?.at }
		});
		const again = await signOne(actor, screening.id);
		expect(await signaturesOn(actor, screening.id)).toMatchObject([
			{ id: again, standing: 'stands' },
			{ id, standing: 'broken' }
		]);

		// The same answers sent once more change nothing.
		await turn({ id: screening.id, version: back.version }, true);
		expect((await signaturesOn(actor, screening.id))[0]).toMatchObject({
			id: again,
			standing: 'stands'
		});
	});

	test('R-14: a signature moved to another record, to another signer or to other words is found damaged', async () => {
		const actor = await investigator();
		const [one, two] = [await answered(), await answered()];
		const id = await signOne(actor, one.id);
		const standing = async () => (await getSignature(actor, scene.studyId, id)).standing;
		expect(await standing()).toBe('stands');
		const before = await verifySignatures(systemActor(newId()));
		for (const [change, back] of [
			[`record_id = '${two.id}'`, `record_id = '${one.id}'`],
			[`signer_id = '${scene.investigator.personId}'`, `signer_id = '${actor.personId}'`],
			[`printed_name = 'Somebody Else'`, `printed_name = 'Dr Celia Roon'`],
			[
				`statement = 'I approve.'`,
				`statement = 'I have checked the eligibility of this person and confirm it.'`
			],
			[`at = at - interval '1 day'`, `at = at + interval '1 day'`],
			[
				`content = replace(content, '"yes: met"', '"met"')`,
				`content = replace(content, '"met"', '"yes: met"')`
			]
		]) {
			await tamper(`update app.signature set ${change} where id = '${id}'`);
			expect(await standing(), change).toBe('damaged');
			const told = await verifySignatures(systemActor(newId()));
			expect(told.damaged, change).toBe(before.damaged + 1);
			expect(told.lines.some((line) => line.includes(id) && line.includes('damaged'))).toBe(true);
			await tamper(`update app.signature set ${back} where id = '${id}'`);
			expect(await standing(), back).toBe('stands');
		}
	});

	test('the command counts what stands, what is broken and since when, and what is damaged', async () => {
		const before = await verifySignatures(systemActor(newId()));
		const actor = await investigator();
		const screening = await answered();
		const id = await signOne(actor, screening.id);
		expect(await verifySignatures(systemActor(newId()))).toMatchObject({
			standing: before.standing + 1,
			broken: before.broken
		});
		await turn(screening);
		const after = await verifySignatures(systemActor(newId()));
		expect(after).toMatchObject({
			standing: before.standing,
			broken: before.broken + 1,
			damaged: before.damaged
		});
		expect(command()).toEqual({ status: 0, last: after.lines.at(-1) });
		await tamper(`update app.signature set printed_name = 'Nobody' where id = '${id}'`);
		expect(command()).toEqual({
			status: 1,
			last: expect.stringContaining(`${before.damaged + 1} damaged`)
		});
		// Taken out behind the program's back: the trail remembers it.
		await tamper(`delete from app.signature where id = '${id}'`);
		const gone = await verifySignatures(systemActor(newId()));
		expect(gone.missing).toBe(before.missing + 1);
		expect(gone.lines).toContain(`signature ${id}: missing, the trail saw it being made`);
		expect(command().status).toBe(1);
		expect(after.lines.find((line) => line.includes(id))).toMatch(
			/broken, changed on .*Europe\/London/
		);
	});
});

describe('signing again proves who signs', () => {
	const attempts = async (actor: Actor) =>
		(
			await db.sql(
				`select after ->> 'code' as code from audit.event where action = 'refused' and record = 'signature.sign' and actor = '${actor.personId}'`
			)
		)[0];

	test('R-15: address and password first, then the password; after a break both again; a session that is over signs nothing', async () => {
		const actor = await investigator();
		const screenings: string[] = [];
		for (let n = 0; n < 5; n++) screenings.push((await answered()).id);
		const attempt = async (at: number, secrets: { email?: string; password: string }) =>
			sign(actor, scene.studyId, {
				items: [await itemOf(actor, screenings[at] as string)],
				...secrets
			});
		await expect(attempt(0, { password })).rejects.toMatchObject({
			code: 'INVALID',
			fields: { email: expect.any(String) }
		});
		await attempt(0, { email: ` ${actor.email.toUpperCase()} `, password });
		await attempt(1, { password });
		await expect(attempt(2, { password: '' })).rejects.toMatchObject({ code: 'SIGNING_SECRET' });

		await lockSession(actor);
		await expect(attempt(2, { email: actor.email, password })).rejects.toMatchObject({
			code: 'NOT_SIGNED_IN'
		});
		expect(await unlockSession(actor, password)).toBe(true);
		await expect(attempt(2, { password })).rejects.toMatchObject({
			fields: { email: expect.any(String) }
		});
		await attempt(2, { email: actor.email, password });

		// Left alone until it locked itself: nothing is written then, and unlocking is the break all the same.
		expect(await unlockSession(actor, password)).toBe(true);
		await expect(attempt(3, { password })).rejects.toMatchObject({
			fields: { email: expect.any(String) }
		});

		const item = await itemOf(actor, screenings[3] as string);
		await endSession(actor, actor.sessionId as string);
		await expect(
			sign(actor, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'NOT_SIGNED_IN' });
		const anew = await begin(actor);
		await expect(sign(anew, scene.studyId, { items: [item], password })).rejects.toMatchObject({
			fields: { email: expect.any(String) }
		});
	});

	test('a wrong secret is refused with a sentence, recorded, and throttled as at the sign-in', async () => {
		const actor = await investigator();
		const item = await itemOf(actor, (await answered()).id);
		const before = await count();
		const attempt = (email: string, secret: string) =>
			sign(actor, scene.studyId, { items: [item], email, password: secret });
		await expect(attempt(actor.email, 'not the password')).rejects.toMatchObject({
			code: 'SIGNING_SECRET',
			fields: { password: expect.any(String) }
		});
		await expect(attempt(scene.investigator.email, password)).rejects.toMatchObject({
			code: 'SIGNING_SECRET'
		});
		for (let n = 0; n < 3; n++)
			await expect(attempt(actor.email, 'guess')).rejects.toMatchObject({ code: 'SIGNING_SECRET' });
		await expect(attempt(actor.email, password)).rejects.toMatchObject({ code: 'THROTTLED' });
		expect(await attempts(actor)).toEqual(Array(5).fill({ code: 'SIGNING_SECRET' }));
		expect(await count()).toBe(before);
	});

	test('who signs in through the organisation alone is told to set a password first', async () => {
		const actor = await investigator();
		const { id } = await answered();
		const item = await itemOf(actor, id);
		await asOwner(db, (client) =>
			client.query('update app.person set password_hash = null where id = $1', [actor.personId])
		);
		expect((await findWaiting(actor, scene.studyId)).needs).toBe('a password of your own');
		await expect(
			sign(actor, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'SIGNING_PASSWORD' });
	});
});

describe('a signature belongs to one person', () => {
	const administrator = async () => {
		const id = await addPerson(db, {
			email: `admin-${newId()}@example.org`,
			name: 'Ines Varga',
			passwordHash
		});
		await addRole(db, id, 'administrator');
		return begin(await actorFor(id, 'test'));
	};

	test('R-16: a removed person’s address is not given to another, and the signature still shows who it was', async () => {
		const admin = await administrator();
		const actor = await investigator();
		const id = await signOne(actor, (await answered()).id);
		await setActive(admin, actor.personId, { active: false, version: 1 });
		await expect(
			invitePerson(admin, { email: actor.email, name: 'Somebody New' })
		).rejects.toMatchObject({ code: 'EMAIL_TAKEN' });
		await expect(
			db.sql(`delete from app.person where id = '${actor.personId}'`)
		).rejects.toMatchObject({ code: '23503' });
		await asOwner(db, (client) =>
			client.query(`update app.person set name = 'Dr Celia Marsh' where id = $1`, [actor.personId])
		);
		expect(await getSignature(scene.manager, scene.studyId, id)).toMatchObject({
			name: 'Dr Celia Roon',
			standing: 'stands'
		});
	});

	test('R-17: an administrator has no way to set a password, and whoever acts signs in the own name only', async () => {
		const admin = await administrator();
		const actor = await investigator();
		const { id } = await answered();
		const item = await itemOf(actor, id);
		// All an administrator can do about a password is to have a link sent to its owner, and only before there is one.
		await expect(inviteAgain(admin, actor.personId)).rejects.toMatchObject({
			code: 'NO_INVITATION'
		});
		await expect(
			sign(admin, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
		const posing = { ...actor, sessionId: admin.sessionId };
		await expect(
			sign(posing, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'NOT_SIGNED_IN' });

		// A reset asked for by somebody else changes nothing: its link goes to the owner, who alone chooses the new password.
		await requestReset(actor.email, newId());
		const [[mail] = []] = await db.sql(
			`select person_id, secret from app.mail where kind = 'reset' and person_id = '${actor.personId}'`
		);
		await expect(
			sign(actor, scene.studyId, { items: [item], email: actor.email, password: 'of the admin' })
		).rejects.toMatchObject({ code: 'SIGNING_SECRET' });
		const token = unwrap(mail.secret).split('/').pop() as string;
		await setPasswordByLink(token, 'reset', 'another warp and weft', newId());
		await expect(
			sign(actor, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'NOT_SIGNED_IN' });
		const anew = await begin(actor);
		await expect(
			sign(anew, scene.studyId, { items: [item], email: actor.email, password })
		).rejects.toMatchObject({ code: 'SIGNING_SECRET' });
		const own = await answered();
		await sign(anew, scene.studyId, {
			items: [await itemOf(anew, own.id)],
			email: actor.email,
			password: 'another warp and weft'
		});

		const content = '{}';
		const put = async (who: string, signer: string, session: string | null) => {
			const client = new pg.Client({ connectionString: db.appUrl });
			await client.connect();
			try {
				await client.query('begin');
				await client.query(`select app.enter($1, 'investigator', 'test', '', null)`, [who]);
				await client.query(
					`insert into app.signature (id, study_id, site_id, record, record_id, meaning, statement, form_version, content, sha256,
						signer_id, session_id, printed_name, at) values ($1, $2, $3, 'eligibility', $4, 'eligibility', 'I confirm it.', 1, $5, $6, $7, $8,
						'A Forged Name', '2001-01-01')`,
					[
						newId(),
						scene.studyId,
						scene.sites[0]?.id,
						id,
						content,
						fingerprintNow(content),
						signer,
						session
					]
				);
				const { rows } = await client.query(
					`select printed_name, at > now() - interval '1 minute' as now from app.signature where record_id = $1`,
					[id]
				);
				return rows[0];
			} finally {
				await client.query('rollback');
				await client.end();
			}
		};
		const system = '00000000-0000-7000-8000-000000000001';
		for (const [who, signer, session] of [
			[admin.personId, actor.personId, anew.sessionId],
			[system, actor.personId, anew.sessionId],
			[system, system, anew.sessionId],
			[actor.personId, actor.personId, admin.sessionId],
			[actor.personId, admin.personId, anew.sessionId]
		] as const)
			await expect(put(who, signer, session)).rejects.toMatchObject({ code: 'HD006' });
		// In the own name and session it is taken; name and instant are the database's own.
		expect(await put(actor.personId, actor.personId, anew.sessionId)).toEqual({
			printed_name: 'Dr Celia Roon',
			now: true
		});
	});
});

describe('a protocol that asks for the signature', () => {
	let asking: Scene;
	beforeAll(async () => {
		asking = await makeScene(db);
		await tamper(
			`update app.protocol_version set definition = definition || '{"eligibilitySigned": true}' where study_id = '${asking.studyId}'`
		);
		await makeList(db, asking);
		end = useAs(db.appUrl);
	});

	test('enrols and randomises nobody without one that stands', async () => {
		const actor = await investigator(asking);
		const screening = await answered(asking);
		await recordConsent(
			asking.coordinator,
			asking.studyId,
			screening.id,
			consentOn(asking, asking.coordinator, '2026-03-02')
		);
		const enrol = () =>
			enrolSubject(
				asking.coordinator,
				asking.studyId,
				screening.id,
				{ enrolledOn: '2026-03-02', ...particulars },
				screening.version
			);
		await expect(enrol()).rejects.toMatchObject({ code: 'SIGNATURE_NEEDED' });
		await signOne(actor, screening.id, asking);
		const subject = await enrol();
		const move = (day: string) =>
			asOwner(db, (client) =>
				client.query('update app.screening set screened_on = $1 where id = $2', [day, screening.id])
			);
		await move('2026-03-01');
		await expect(
			randomiseSubject(asking.coordinator, asking.studyId, subject.id)
		).rejects.toMatchObject({ code: 'SIGNATURE_NEEDED' });
		await move('2026-03-02');
		const { kitNumber } = await randomiseSubject(asking.coordinator, asking.studyId, subject.id);
		expect(kitNumber).not.toBe('');
	});
});
