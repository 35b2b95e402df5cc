import { newId, newToken } from '$lib/id';
import { Refusal } from '$lib/refusal';
import type { Actor } from '$lib/server/actor';
import {
	change,
	changeOwn,
	mustHaveChanged,
	readOwn,
	recordRefusal,
	type Writer
} from '$lib/server/change';
import { hashPassword, passwordFits } from '$lib/server/auth/password';
import { countTry, forgiveTries } from '$lib/server/auth/throttle';
import { config } from '$lib/server/config';
import { queueMail } from '$lib/server/mail/queue-mail';
import { tokenHash } from '$lib/server/secret';
import { clock } from '$lib/time/clock';
import { instantText } from '$lib/time/zones';
import { checkPassword } from './password';

const hourMs = 3_600_000;
export const linkHours = { invitation: 7 * 24, reset: 1, 'set-up': 24 } as const;

/** A new link of this purpose; older ones of the same person stop working. The address holds the secret. */
export async function newLink(
	writer: Writer,
	personId: string | null,
	purpose: keyof typeof linkHours
): Promise<{ secret: string; expires: string }> {
	const now = clock.now();
	const expiresAt = new Date(now.getTime() + linkHours[purpose] * hourMs);
	await voidLinks(writer, personId, purpose);
	const token = newToken();
	await writer
		.insertInto('link')
		.values({
			id: newId(),
			person_id: personId,
			purpose,
			token_hash: tokenHash(token),
			expires_at: expiresAt
		})
		.execute();
	return {
		secret: `${config().origin}/${purpose}/${token}`,
		expires: instantText(expiresAt, 'UTC')
	};
}

export async function voidLinks(
	writer: Writer,
	personId: string | null,
	purpose?: keyof typeof linkHours
): Promise<void> {
	const now = clock.now();
	await writer
		.updateTable('link')
		.set({ expires_at: now })
		.where('person_id', personId === null ? 'is' : '=', personId)
		.where('used_at', 'is', null)
		.where('expires_at', '>', now)
		.$if(purpose !== undefined, (q) => q.where('purpose', '=', purpose as keyof typeof linkHours))
		.execute();
}

export const endSessions = (writer: Writer, personId: string, except: string | null = null) =>
	writer
		.updateTable('session')
		.set({ ended_at: clock.now() })
		.where('person_id', '=', personId)
		.where('ended_at', 'is', null)
		.$if(except !== null, (q) => q.where('id', '<>', except as string))
		.execute();

/** Makes an account and sends its invitation: a link with which the person chooses a password. */
export const invitePerson = (
	actor: Actor,
	input: { email: string; name: string }
): Promise<string> =>
	change(actor, 'person.manage', {}, async (writer) => {
		const id = newId();
		await writer
			.insertInto('person')
			.values({ id, email: input.email, name: input.name })
			.execute();
		await sendInvitation(writer, id);
		return id;
	});

async function sendInvitation(writer: Writer, personId: string): Promise<void> {
	const { secret, expires } = await newLink(writer, personId, 'invitation');
	await queueMail(writer, { kind: 'invitation', personId, facts: { expires }, secret });
}

/** For an invitation that was lost or grew too old. Whoever has a password asks for a reset himself. */
export const inviteAgain = (actor: Actor, personId: string): Promise<void> =>
	change(actor, 'person.manage', {}, async (writer) => {
		const person = await writer
			.selectFrom('person')
			.select(['id', 'password_hash', 'active'])
			.where('id', '=', personId)
			.where('kind', '=', 'person')
			.executeTakeFirst();
		if (!person) throw new Refusal('NOT_FOUND');
		if (!person.active || person.password_hash !== null) throw new Refusal('NO_INVITATION');
		await sendInvitation(writer, personId);
	});

/**
 * Switches an account off, ending its sessions and links in the same moment, or on again. The person, the name and all
 * that was done under it stay.
 */
export async function setActive(
	actor: Actor,
	personId: string,
	input: { active: boolean; version: number }
): Promise<void> {
	// Nobody locks himself out: so there is always an administrator left.
	if (personId === actor.personId) throw new Refusal('OWN_ACCOUNT');
	await change(actor, 'person.manage', {}, async (writer) => {
		const there = await writer
			.selectFrom('person')
			.select('id')
			.where('id', '=', personId)
			.where('kind', '=', 'person')
			.executeTakeFirst();
		if (!there) throw new Refusal('NOT_FOUND');
		mustHaveChanged(
			await writer
				.updateTable('person')
				.set({ active: input.active })
				.where('id', '=', personId)
				.where('version', '=', input.version)
				.returning('id')
				.execute()
		);
		if (input.active) return;
		await endSessions(writer, personId);
		await voidLinks(writer, personId);
	});
}

/** Turns a password down with its reason beside the field. */
export function mustBeGood(password: string, context: readonly string[]): void {
	const wrong = checkPassword(password, context);
	if (wrong)
		throw new Refusal('WEAK_PASSWORD', { why: wrong.message }, { password: wrong.message });
}

/** A new password for oneself; the other sessions end, this one goes on. */
export async function changePassword(
	actor: Actor,
	input: { current: string; password: string }
): Promise<void> {
	mustBeGood(input.password, [actor.name, actor.email]);
	await countTry('account', actor.email);
	const own = await readOwn(actor, (reader) =>
		reader
			.selectFrom('person')
			.select('password_hash')
			.where('id', '=', actor.personId)
			.executeTakeFirst()
	);
	if (!(await passwordFits(own?.password_hash ?? null, input.current))) {
		await recordRefusal(actor, 'password.change', {}, { code: 'WRONG_PASSWORD' });
		throw new Refusal('INVALID', {}, { current: 'That is not your password.' });
	}
	const hash = await hashPassword(input.password);
	await changeOwn(actor, 'password.change', async (writer) => {
		await writer
			.updateTable('person')
			.set({ password_hash: hash })
			.where('id', '=', actor.personId)
			.execute();
		await endSessions(writer, actor.personId, actor.sessionId);
	});
	await forgiveTries('account', actor.email);
}
