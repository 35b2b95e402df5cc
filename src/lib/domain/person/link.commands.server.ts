import { sql } from 'kysely';
import { newId } from '$lib/id';
import { Refusal } from '$lib/refusal';
import { systemActor, systemPersonId, type Actor } from '$lib/server/actor';
import { changeOwn, readOwn, recordRefusal } from '$lib/server/change';
import { hashPassword } from '$lib/server/auth/password';
import { countTry, forgiveTries } from '$lib/server/auth/throttle';
import { queueMail } from '$lib/server/mail/queue-mail';
import { tokenHash } from '$lib/server/secret';
import { clock } from '$lib/time/clock';
import { endSessions, mustBeGood, newLink, voidLinks } from './person.commands.server';

type Purpose = 'invitation' | 'reset' | 'set-up';

interface FoundLink {
	id: string;
	person: { id: string; name: string; email: string } | null;
}

/** The link that this token opens, if it still does. Looking changes nothing: mail scanners look too. */
export async function findLink(
	token: string,
	purpose: Purpose,
	requestId: string
): Promise<FoundLink | null> {
	if (!/^[\w-]{20,100}$/.test(token)) return null;
	return readOwn(systemActor(requestId), async (reader) => {
		const link = await reader
			.selectFrom('link')
			.select(['id', 'person_id'])
			.where('token_hash', '=', tokenHash(token))
			.where('purpose', '=', purpose)
			.where('used_at', 'is', null)
			.where('expires_at', '>', clock.now())
			.executeTakeFirst();
		if (!link) return null;
		if (link.person_id === null) return { id: link.id, person: null };
		const person = await reader
			.selectFrom('person')
			.select(['id', 'name', 'email'])
			.where('id', '=', link.person_id)
			.where('active', '=', true)
			.executeTakeFirst();
		return person ? { id: link.id, person } : null;
	});
}

const self = (person: { id: string; name: string; email: string }, requestId: string): Actor => ({
	personId: person.id,
	name: person.name,
	email: person.email,
	sessionId: null,
	requestId,
	grants: [],
	system: false
});

/** Whoever holds the link chooses the password of its account, once. Every session of the account ends. */
export async function setPasswordByLink(
	token: string,
	purpose: 'invitation' | 'reset',
	password: string,
	requestId: string
): Promise<void> {
	const link = await findLink(token, purpose, requestId);
	if (!link?.person) throw new Refusal('BAD_LINK');
	const { person } = link;
	mustBeGood(password, [person.name, person.email]);
	const hash = await hashPassword(password);
	await changeOwn(self(person, requestId), `password.${purpose}`, async (writer) => {
		const used = await writer
			.updateTable('link')
			.set({ used_at: clock.now() })
			.where('id', '=', link.id)
			.where('used_at', 'is', null)
			.where('expires_at', '>', clock.now())
			.returning('id')
			.execute();
		if (used.length === 0) throw new Refusal('BAD_LINK');
		await writer
			.updateTable('person')
			.set({ password_hash: hash })
			.where('id', '=', person.id)
			.execute();
		await voidLinks(writer, person.id);
		await endSessions(writer, person.id);
	});
	// Whoever was locked out by someone else's guessing is let in again.
	await forgiveTries('account', person.email);
}

/** The least time an answer takes: more than the work for an account that is there, so that time tells nothing. */
const evenMs = 900;

/** Sends a reset link to the account, if there is one; whoever asks cannot tell. */
export async function requestReset(email: string, requestId: string): Promise<void> {
	const address = email.trim().toLowerCase();
	await Promise.all([
		sendReset(address, requestId),
		new Promise((resolve) => setTimeout(resolve, evenMs))
	]);
}

async function sendReset(address: string, requestId: string): Promise<void> {
	try {
		await countTry('reset', address);
	} catch (refused) {
		if (refused instanceof Refusal) return;
		throw refused;
	}
	const person = await readOwn(systemActor(requestId), (reader) =>
		reader
			.selectFrom('person')
			.select(['id', 'name', 'email'])
			.where('email', '=', address)
			.where('active', '=', true)
			.where('kind', '=', 'person')
			.executeTakeFirst()
	);
	if (!person)
		return recordRefusal(systemActor(requestId), 'password.reset', {}, { code: 'UNKNOWN_ACCOUNT' });
	await changeOwn(self(person, requestId), 'password.reset', async (writer) => {
		const { secret, expires } = await newLink(writer, person.id, 'reset');
		await queueMail(writer, { kind: 'reset', personId: person.id, facts: { expires }, secret });
	});
}

/** Makes the first administrator. Possible once, and only before there is one. */
export async function setUp(
	token: string,
	input: { email: string; name: string; password: string },
	requestId: string
): Promise<void> {
	const link = await findLink(token, 'set-up', requestId);
	if (!link) throw new Refusal('BAD_LINK');
	mustBeGood(input.password, [input.name, input.email]);
	const hash = await hashPassword(input.password);
	await changeOwn(systemActor(requestId), 'set-up', async (writer) => {
		const { rows } = await sql<{ first: boolean }>`select app.mark_set_up() as first`.execute(
			writer
		);
		if (!rows[0]?.first) throw new Refusal('BAD_LINK');
		const used = await writer
			.updateTable('link')
			.set({ used_at: clock.now() })
			.where('id', '=', link.id)
			.where('used_at', 'is', null)
			.returning('id')
			.execute();
		if (used.length === 0) throw new Refusal('BAD_LINK');
		const id = newId();
		await writer
			.insertInto('person')
			.values({ id, email: input.email, name: input.name, password_hash: hash })
			.execute();
		await writer
			.insertInto('person_role')
			.values({
				id: newId(),
				person_id: id,
				role: 'administrator',
				valid_from: clock.now().toISOString().slice(0, 10),
				granted_by: systemPersonId
			})
			.execute();
		await voidLinks(writer, null, 'set-up');
	});
}

/** The address with which the first administrator is made, or null when that was done already. */
export async function setUpLink(requestId: string): Promise<string | null> {
	return changeOwn(systemActor(requestId), 'set-up.link', async (writer) => {
		const done = await writer
			.selectFrom('installation')
			.select((eb) => [
				'set_up_at',
				eb
					.exists(eb.selectFrom('person_role').select('id').where('role', '=', 'administrator'))
					.as('has_administrator')
			])
			.executeTakeFirstOrThrow();
		if (done.set_up_at !== null || done.has_administrator) return null;
		return (await newLink(writer, null, 'set-up')).secret;
	});
}
