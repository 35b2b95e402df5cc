import { mustGive } from '$lib/domain/signature/signature';
import { Refusal } from '$lib/refusal';
import type { Actor } from '../actor';
import { readOwn, recordRefusal, type Writer } from '../change';
import type { Scope } from '../permission';
import { clock } from '$lib/time/clock';
import { passwordFits } from './password';
import { countTry, forgiveTries } from './throttle';

/** The person's password and how long this session has been signing; a session that has ended signs nothing. */
async function signerOf(actor: Actor) {
	const found = await readOwn(actor, (reader) =>
		reader
			.selectFrom('session as s')
			.innerJoin('person as p', 'p.id', 's.person_id')
			.select(['p.password_hash', 's.signing_since'])
			.where('s.id', '=', actor.sessionId)
			.where('s.person_id', '=', actor.personId)
			.where('s.ended_at', 'is', null)
			.where('s.locked_at', 'is', null)
			.executeTakeFirst()
	);
	if (!found) throw new Refusal('NOT_SIGNED_IN');
	return found;
}

/** What the actor must give to sign next, or that there is no password to give. */
export async function signingNeeds(
	actor: Actor
): Promise<'address and password' | 'password' | 'a password of your own'> {
	const { password_hash, signing_since } = await signerOf(actor);
	return password_hash === null ? 'a password of your own' : mustGive(signing_since);
}

/**
 * Makes sure that the signer is who is signed in: the address and the password after signing in or unlocking, at least
 * the password afterwards. A wrong one is counted as at the sign-in, recorded, and refused.
 */
export async function proveSigner(
	actor: Actor,
	scope: Scope,
	given: { email?: string | undefined; password: string }
): Promise<void> {
	const { password_hash, signing_since } = await signerOf(actor);
	if (password_hash === null) throw new Refusal('SIGNING_PASSWORD');
	const address = (given.email ?? '').trim().toLowerCase();
	const both = mustGive(signing_since) === 'address and password';
	if (both && address === '')
		throw new Refusal(
			'INVALID',
			{},
			{ email: 'For the first signature since you signed in, enter your address too.' }
		);
	await countTry('account', actor.email);
	const fits = await passwordFits(password_hash, given.password);
	if (!fits || (address !== '' && address !== actor.email)) {
		await recordRefusal(actor, 'signature.sign', scope, { code: 'SIGNING_SECRET' });
		throw new Refusal(
			'SIGNING_SECRET',
			{},
			{ password: both ? 'Enter your own address and password.' : 'That is not your password.' }
		);
	}
	await forgiveTries('account', actor.email);
}

/** Notes, with the first signature, that this session signs from now on: the password alone is asked until a break. */
export const beginSigning = (writer: Writer, actor: Actor) =>
	writer
		.updateTable('session')
		.set({ signing_since: clock.now() })
		.where('id', '=', actor.sessionId)
		.where('person_id', '=', actor.personId)
		.where('signing_since', 'is', null)
		.execute();
