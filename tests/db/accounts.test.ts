import { afterAll, beforeAll, describe, expect, test } from 'vitest';
import {
	confirmGrant,
	endGrant,
	grantRole
} from '../../src/lib/domain/person/grant.commands.server';
import {
	findLink,
	requestReset,
	setPasswordByLink,
	setUp,
	setUpLink
} from '../../src/lib/domain/person/link.commands.server';
import {
	changePassword,
	inviteAgain,
	invitePerson,
	setActive
} from '../../src/lib/domain/person/person.commands.server';
import { accessAt, getPerson, listPeople } from '../../src/lib/domain/person/person.reads.server';
import type { Role } from '../../src/lib/domain/person/roles';
import { newId } from '../../src/lib/id';
import { findSession, personForPassword, startSession } from '../../src/lib/server/auth/session';
import { openDatabase, useDatabase, type Database } from '../../src/lib/server/db/db';
import { forgetSender } from '../../src/lib/server/jobs/queue';
import { unwrap } from '../../src/lib/server/secret';
import { clock } from '../../src/lib/time/clock';
import { plainDateOf } from '../../src/lib/time/dates';
import { freshDatabase, useEnvironment, type FreshDatabase } from '../support/database';
import { addPerson, addRole, asOwner } from '../support/people';
import { actorFrom, addBareStudy, grant, type BareStudy } from '../support/bare-scene';

const password = 'linen warp and weft';
let db: FreshDatabase;
let opened: Database;
let study: BareStudy;
let ada: string;
let ben: string;
const admin = (id: string) => actorFrom({ id }, [grant('administrator')]);
const today = () => clock.now().toISOString().slice(0, 10);

beforeAll(async () => {
	db = await freshDatabase();
	useEnvironment(db, { SMTP_URL: 'smtp://127.0.0.1:9', MAIL_FROM: 'Heddle <heddle@heddle.test>' });
	opened = openDatabase(db.appUrl, 4);
	useDatabase(opened);
	forgetSender();
	study = await addBareStudy(db, 'AC-1');
	ada = await addPerson(db, { email: 'ada@example.org', name: 'Ada Loom' });
	ben = await addPerson(db, { email: 'ben@example.org', name: 'Ben Reed' });
	await addRole(db, ada, 'administrator');
	await addRole(db, ben, 'administrator');
});
afterAll(async () => {
	await opened?.close();
	await db?.drop();
});

/** The link that the newest mail to the person carries. */
async function linkTo(personId: string): Promise<string> {
	const [rows] = await db.sql(
		`select secret from app.mail where person_id = '${personId}' and secret is not null order by id desc limit 1`
	);
	return unwrap(rows?.[0].secret).split('/').pop() as string;
}
let count = 0;
const invited = (name = 'Cleo Heald') =>
	invitePerson(admin(ada), { email: `p${++count}@example.org`, name });

describe('invitations', () => {
	test('make an account, a mail and its job in one transaction, and the link is kept as a hash alone', async () => {
		const id = await invited();
		const token = await linkTo(id);
		const [links, mails, jobs] = await db.sql(
			`select purpose, encode(token_hash, 'escape') as hash, expires_at - created_at as age from app.link where person_id = '${id}'`,
			`select id, kind, status, message_id, facts from app.mail where person_id = '${id}'`,
			`select data from queue.job where name = 'mail' and data->>'mailId' in (select id::text from app.mail where person_id = '${id}')`
		);
		expect(links).toHaveLength(1);
		expect(links?.[0].hash).not.toContain(token);
		expect(mails?.[0]).toMatchObject({ kind: 'invitation', status: 'waiting' });
		expect(mails?.[0].message_id).toMatch(/^<[0-9a-f-]{36}@heddle\.test>$/);
		expect(jobs).toEqual([{ data: { mailId: mails?.[0].id } }]);
	});

	test('the token stands nowhere in the audit trail nor in the queue', async () => {
		const id = await invited();
		const token = await linkTo(id);
		const [rows] = await db.sql(
			`select (select count(*) from audit.event where (before::text || after::text) like '%${token}%') as trail,
				(select count(*) from queue.job where data::text like '%${token}%') as queue`
		);
		expect(rows?.[0]).toEqual({ trail: '0', queue: '0' });
	});

	test('an address that has an account is refused, also in other letters', async () => {
		await expect(
			invitePerson(admin(ada), { email: 'ben@example.org', name: 'Another Ben' })
		).rejects.toMatchObject({ code: 'EMAIL_TAKEN' });
	});

	test('the link sets a password once; looking at it changes nothing', async () => {
		const id = await invited();
		const token = await linkTo(id);
		for (let looks = 0; looks < 3; looks++)
			expect((await findLink(token, 'invitation', newId()))?.person?.id).toBe(id);
		await setPasswordByLink(token, 'invitation', password, newId());
		const [rows] = await db.sql(`select email, password_hash from app.person where id = '${id}'`);
		expect(rows?.[0].password_hash).toMatch(/^\$argon2id\$/);
		expect(await personForPassword(rows?.[0].email, password, newId())).toMatchObject({ id });
		await expect(
			setPasswordByLink(token, 'invitation', 'another fine password', newId())
		).rejects.toMatchObject({ code: 'BAD_LINK' });
	});

	test('two who open the link at once: one sets the password', async () => {
		const token = await linkTo(await invited());
		const tries = await Promise.allSettled([
			setPasswordByLink(token, 'invitation', password, newId()),
			setPasswordByLink(token, 'invitation', `${password} too`, newId())
		]);
		expect(tries.filter((t) => t.status === 'fulfilled')).toHaveLength(1);
	});

	test('a link is not good for another purpose, after seven days, or once a newer one was sent', async () => {
		const id = await invited();
		const first = await linkTo(id);
		expect(await findLink(first, 'reset', newId())).toBeNull();
		await inviteAgain(admin(ada), id);
		const second = await linkTo(id);
		expect(await findLink(first, 'invitation', newId())).toBeNull();
		expect(await findLink(second, 'invitation', newId())).not.toBeNull();
		clock.advance((7 * 24 + 0.1) * 3_600_000);
		try {
			expect(await findLink(second, 'invitation', newId())).toBeNull();
			await expect(
				setPasswordByLink(second, 'invitation', password, newId())
			).rejects.toMatchObject({ code: 'BAD_LINK' });
		} finally {
			clock.reset();
		}
	});

	test.each([
		['short', 'tiny password'],
		['common', 'passwordpassword'],
		['the own name', 'Cleo Heald Cleo Heald']
	])('a password that is %s is turned down and the link stays good', async (_, weak) => {
		const token = await linkTo(await invited());
		await expect(setPasswordByLink(token, 'invitation', weak, newId())).rejects.toMatchObject({
			code: 'WEAK_PASSWORD'
		});
		await setPasswordByLink(token, 'invitation', password, newId());
	});
});

describe('resets', () => {
	test('set a new password, end every session and let in whoever was locked out by tries', async () => {
		const id = await invited('Dora Shed');
		await setPasswordByLink(await linkTo(id), 'invitation', password, newId());
		const [person] = await db.sql(`select id, name, email from app.person where id = '${id}'`);
		const sid = await startSession(person?.[0], 'password', 'test', newId());
		for (let tries = 0; tries < 5; tries++)
			await personForPassword(person?.[0].email, 'wrong wrong wrong', newId());
		await expect(personForPassword(person?.[0].email, password, newId())).rejects.toMatchObject({
			code: 'THROTTLED'
		});
		await requestReset(person?.[0].email, newId());
		const token = await linkTo(id);
		await setPasswordByLink(token, 'reset', 'a heddle lifts threads', newId());
		expect(await findSession(sid, newId(), clock.now())).toBeNull();
		expect(
			await personForPassword(person?.[0].email, 'a heddle lifts threads', newId())
		).toMatchObject({ id });
	});

	test('an unknown, a switched-off and a known account are answered alike; only the known one gets mail', async () => {
		const id = await invited('Elis Pick');
		const off = await invited('Fay Beam');
		await setActive(admin(ada), off, { active: false, version: 1 });
		const [rows] = await db.sql(`select id, email from app.person where id in ('${id}', '${off}')`);
		const emailOf = (who: string) => rows?.find((r) => r.id === who).email as string;
		expect(await requestReset(emailOf(id), newId())).toBeUndefined();
		expect(await requestReset(emailOf(off), newId())).toBeUndefined();
		expect(await requestReset('nobody-at-all@example.org', newId())).toBeUndefined();
		const [mails] = await db.sql(
			`select person_id from app.mail where kind = 'reset' and person_id in ('${id}', '${off}')`
		);
		expect(mails).toEqual([{ person_id: id }]);
		const [refused] = await db.sql(
			`select after from audit.event where action = 'refused' and record = 'password.reset'`
		);
		expect(refused?.length).toBeGreaterThanOrEqual(2);
		expect(JSON.stringify(refused)).not.toContain('nobody-at-all');
	});

	test('no more than three mails an hour go to one address', async () => {
		const id = await invited('Gil Sley');
		const [rows] = await db.sql(`select email from app.person where id = '${id}'`);
		for (let n = 0; n < 5; n++) await requestReset(rows?.[0].email, newId());
		const [mails] = await db.sql(
			`select count(*)::int as n from app.mail where kind = 'reset' and person_id = '${id}'`
		);
		expect(mails?.[0].n).toBe(3);
	});
});

describe('one’s own password', () => {
	test('changes only with the present one; the other sessions end and this one stays', async () => {
		const id = await invited('Hanna Raddle');
		await setPasswordByLink(await linkTo(id), 'invitation', password, newId());
		const [rows] = await db.sql(`select id, name, email from app.person where id = '${id}'`);
		const here = await startSession(rows?.[0], 'password', 'here', newId());
		const there = await startSession(rows?.[0], 'password', 'there', newId());
		const actor = { ...actorFrom(rows?.[0]), sessionId: here };
		await expect(
			changePassword(actor, { current: 'not this one at all', password: 'threads of many colours' })
		).rejects.toMatchObject({ fields: { current: expect.any(String) } });
		await changePassword(actor, { current: password, password: 'threads of many colours' });
		expect(await findSession(here, newId(), clock.now())).not.toBeNull();
		expect(await findSession(there, newId(), clock.now())).toBeNull();
	});
});

describe('switching off', () => {
	test('ends every session at once and keeps the name on what was done', async () => {
		const id = await invited('Ivo Temple');
		const [rows] = await db.sql(
			`select id, name, email, version from app.person where id = '${id}'`
		);
		await setPasswordByLink(await linkTo(id), 'invitation', password, newId());
		const sid = await startSession(rows?.[0], 'password', 'test', newId());
		expect(await findSession(sid, newId(), clock.now())).not.toBeNull();
		const before = await getPerson(admin(ada), id);
		await setActive(admin(ada), id, { active: false, version: before.version });
		expect(await findSession(sid, newId(), clock.now())).toBeNull();
		expect(await personForPassword(rows?.[0].email, password, newId())).toBeNull();
		const [events] = await db.sql(
			`select p.name from audit.event e join app.person p on p.id = e.actor where e.actor = '${id}'`
		);
		expect(events?.length).toBeGreaterThan(0);
		expect(new Set(events?.map((e) => e.name))).toEqual(new Set(['Ivo Temple']));
		await setActive(admin(ada), id, { active: true, version: before.version + 1 });
		expect(await personForPassword(rows?.[0].email, password, newId())).toMatchObject({ id });
		expect(await findSession(sid, newId(), clock.now())).toBeNull();
	});

	test('is refused for oneself, with a stale version, and for who is no administrator', async () => {
		const id = await invited();
		await expect(setActive(admin(ada), ada, { active: false, version: 1 })).rejects.toMatchObject({
			code: 'OWN_ACCOUNT'
		});
		await expect(setActive(admin(ada), id, { active: false, version: 7 })).rejects.toMatchObject({
			code: 'STALE'
		});
		await expect(
			setActive(actorFrom({ id }, []), ben, { active: false, version: 1 })
		).rejects.toMatchObject({ code: 'NOT_PERMITTED' });
	});
});

describe('roles', () => {
	const give = (
		by: string,
		to: string,
		role: Role,
		more: { studyId?: string; siteId?: string; validFrom?: string; validTo?: string } = {}
	) =>
		grantRole(admin(by), to, {
			role,
			studyId: more.studyId ?? '',
			siteId: more.siteId ?? '',
			validFrom: plainDateOf(more.validFrom ?? today()),
			validTo: more.validTo ? plainDateOf(more.validTo) : ''
		});
	const grantsOf = async (personId: string) => {
		const [rows] = await db.sql(`select id, name, email from app.person where id = '${personId}'`);
		const sid = await startSession(rows?.[0], 'password', 'test', newId());
		return (await findSession(sid, newId(), clock.now()))?.actor.grants;
	};

	test('are granted per study and site with dates, and are in force on those days alone', async () => {
		const id = await invited();
		await give(ada, id, 'nurse', {
			studyId: study.studyId,
			siteId: study.siteIds[0],
			validTo: today()
		});
		await give(ada, id, 'monitor', { studyId: study.studyId, validFrom: '2100-01-01' });
		expect(await grantsOf(id)).toEqual([
			{ role: 'nurse', studyId: study.studyId, siteId: study.siteIds[0] }
		]);
		const person = await getPerson(admin(ada), id);
		expect(person.grants.map((g) => [g.role, g.state])).toEqual([
			['monitor', 'to come'],
			['nurse', 'in force']
		]);
	});

	test('nobody grants one to himself, in the command and in the database', async () => {
		await expect(give(ada, ada, 'auditor', { studyId: study.studyId })).rejects.toMatchObject({
			code: 'OWN_GRANT'
		});
		await expect(
			db.sql(
				`insert into app.person_role (id, person_id, role, study_id, valid_from, granted_by) values ('${newId()}', '${ada}', 'auditor', '${study.studyId}', now(), '${ada}')`
			)
		).rejects.toThrow();
	});

	test.each<[Role, { study?: boolean; site?: boolean }]>([
		['administrator', { study: true }],
		['coordinator', {}],
		['auditor', { study: true, site: true }]
	])('%s is refused at the wrong place', async (role, at) => {
		const id = await invited();
		await expect(
			give(ada, id, role, {
				...(at.study ? { studyId: study.studyId } : {}),
				...(at.site ? { siteId: study.siteIds[0] } : {})
			})
		).rejects.toMatchObject({ code: 'ROLE_PLACE' });
	});

	test('a site of another study, days gone by and a last day before the first are refused', async () => {
		const other = await addBareStudy(db, `AC-${newId().slice(-6)}`);
		const id = await invited();
		const at = { studyId: study.studyId };
		await expect(give(ada, id, 'nurse', { ...at, siteId: other.siteIds[0] })).rejects.toMatchObject(
			{ fields: { siteId: expect.any(String) } }
		);
		await expect(give(ada, id, 'nurse', { ...at, validFrom: '2020-01-01' })).rejects.toMatchObject({
			fields: { validFrom: expect.any(String) }
		});
		await expect(
			give(ada, id, 'nurse', { ...at, validFrom: '2099-02-01', validTo: '2099-01-01' })
		).rejects.toMatchObject({ fields: { validTo: expect.any(String) } });
	});

	// From product.md's separation of duties: administrators without a stake, closed material apart from the team.
	test.each<[Role, Role]>([
		['administrator', 'investigator'],
		['administrator', 'statistician'],
		['administrator', 'independent_statistician'],
		['administrator', 'board_member'],
		['independent_statistician', 'coordinator'],
		['independent_statistician', 'statistician'],
		['board_member', 'nurse'],
		['board_member', 'data_manager'],
		['board_member', 'independent_statistician']
	])('R-28: %s and %s do not meet in one person', async (one, other) => {
		for (const [first, second] of [
			[one, other],
			[other, one]
		] as [Role, Role][]) {
			const id = await invited();
			const where = (role: Role) => (role === 'administrator' ? {} : { studyId: study.studyId });
			await give(ada, id, first, where(first));
			await expect(give(ada, id, second, where(second))).rejects.toMatchObject({
				code: 'ROLE_PAIR'
			});
			// The database refuses the pair by itself too.
			await expect(
				asOwner(db, (client) =>
					client.query(
						`insert into app.person_role (id, person_id, role, study_id, valid_from, granted_by) values ($1, $2, $3, $4, $5, $6)`,
						[
							newId(),
							id,
							second,
							second === 'administrator' ? null : study.studyId,
							today(),
							'00000000-0000-7000-8000-000000000001'
						]
					)
				)
			).rejects.toThrow('ROLE_PAIR');
		}
	});

	test('two grants that would not suit each other cannot pass each other', async () => {
		const id = await invited();
		const tries = await Promise.allSettled([
			give(ada, id, 'nurse', { studyId: study.studyId }),
			give(ben, id, 'board_member', { studyId: study.studyId })
		]);
		expect(tries.filter((t) => t.status === 'fulfilled')).toHaveLength(1);
	});

	test('a role that opens closed material waits until a second administrator confirms it', async () => {
		const id = await invited();
		const grantId = await give(ada, id, 'independent_statistician', { studyId: study.studyId });
		expect(await grantsOf(id)).toEqual([]);
		await expect(confirmGrant(admin(ada), id, { grantId, version: 1 })).rejects.toMatchObject({
			code: 'SECOND_PERSON'
		});
		await confirmGrant(admin(ben), id, { grantId, version: 1 });
		expect(await grantsOf(id)).toHaveLength(1);
		await expect(confirmGrant(admin(ben), id, { grantId, version: 2 })).rejects.toMatchObject({
			code: 'CONFLICT'
		});
	});

	test('ending a role takes it away at once, and it never begins again', async () => {
		const id = await invited();
		const grantId = await give(ada, id, 'auditor', { studyId: study.studyId });
		expect(await grantsOf(id)).toHaveLength(1);
		await expect(endGrant(admin(ben), id, { grantId, version: 9 })).rejects.toMatchObject({
			code: 'STALE'
		});
		await endGrant(admin(ben), id, { grantId, version: 1 });
		expect(await grantsOf(id)).toEqual([]);
		await expect(endGrant(admin(ben), id, { grantId, version: 2 })).rejects.toMatchObject({
			code: 'CONFLICT'
		});
		await expect(
			asOwner(db, (c) =>
				c.query(`update app.person_role set ended_at = null where id = $1`, [grantId])
			)
		).rejects.toThrow();
	});

	test('a grant is never turned into another', async () => {
		const id = await invited();
		const grantId = await give(ada, id, 'auditor', { studyId: study.studyId });
		for (const change of [`role = 'monitor'`, `person_id = '${ben}'`, `valid_from = '2020-01-01'`])
			await expect(
				asOwner(db, (c) => c.query(`update app.person_role set ${change} where id = $1`, [grantId]))
			).rejects.toThrow('NOT_PERMITTED');
	});

	test('a grant of another person is not found', async () => {
		const [one, other] = [await invited(), await invited()];
		const grantId = await give(ada, one, 'auditor', { studyId: study.studyId });
		await expect(endGrant(admin(ben), other, { grantId, version: 1 })).rejects.toMatchObject({
			code: 'NOT_FOUND'
		});
	});

	test('R-10: who held what is told for any past instant, from the trail alone', async () => {
		const id = await invited('Juno Selvedge');
		const moments: Date[] = [];
		const now = async () => {
			const [rows] = await db.sql('select clock_timestamp() as at');
			moments.push(rows?.[0].at as Date);
			await new Promise((resolve) => setTimeout(resolve, 5));
		};
		await now();
		const nurse = await give(ada, id, 'nurse', {
			studyId: study.studyId,
			siteId: study.siteIds[1]
		});
		await now();
		await endGrant(admin(ben), id, { grantId: nurse, version: 1 });
		await give(ben, id, 'coordinator', { studyId: study.studyId });
		await now();
		const person = await getPerson(admin(ada), id);
		await setActive(admin(ada), id, { active: false, version: person.version });
		await now();
		const told = await Promise.all(
			moments.map(async (at) =>
				(await accessAt(admin(ada), at))
					.filter((row) => row.person_id === id && row.in_force)
					.map((row) => [row.role, row.study, row.site, row.granted_by])
			)
		);
		expect(told).toEqual([
			[],
			[['nurse', 'AC-1', '02', 'Ada Loom']],
			[['coordinator', 'AC-1', null, 'Ben Reed']],
			[]
		]);
		await expect(accessAt(actorFrom({ id: ben }, []), moments[0] as Date)).rejects.toMatchObject({
			code: 'NOT_PERMITTED'
		});
	});
});

test('the list of people is paged by name and found by part of name or address', async () => {
	const all: string[] = [];
	let cursor: string | undefined;
	do {
		const page = await listPeople(admin(ada), { limit: 7, cursor });
		expect(page.items.length).toBeLessThanOrEqual(7);
		all.push(...page.items.map((p) => p.id));
		cursor = page.nextCursor ?? undefined;
	} while (cursor);
	const [rows] = await db.sql(`select count(*)::int as n from app.person where kind = 'person'`);
	expect(new Set(all).size).toBe(rows?.[0].n);
	expect(all.length).toBe(rows?.[0].n);
	expect(
		(await listPeople(admin(ada), { limit: 5, find: 'ADA@' })).items.map((p) => p.name)
	).toEqual(['Ada Loom']);
	expect((await listPeople(admin(ada), { limit: 5, find: '%' })).items).toEqual([]);
});

test('the first administrator is made once, by a link that is offered only before there is one', async () => {
	const fresh = await freshDatabase();
	const other = openDatabase(fresh.appUrl, 4);
	useDatabase(other);
	try {
		const first = (await setUpLink(newId()))?.split('/').pop() as string;
		const token = (await setUpLink(newId()))?.split('/').pop() as string;
		expect(await findLink(first, 'set-up', newId())).toBeNull();
		const input = { email: 'first@example.org', name: 'First Administrator', password };
		const tries = await Promise.allSettled([
			setUp(token, input, newId()),
			setUp(token, { ...input, email: 'second@example.org' }, newId())
		]);
		expect(tries.filter((t) => t.status === 'fulfilled')).toHaveLength(1);
		const [people, roles] = await fresh.sql(
			`select id from app.person where kind = 'person'`,
			`select person_id, role from app.person_role`
		);
		expect(roles).toEqual([{ person_id: people?.[0].id, role: 'administrator' }]);
		expect(await setUpLink(newId())).toBeNull();
	} finally {
		useDatabase(opened);
		await other.close();
		await fresh.drop();
	}
});
