import { AsyncLocalStorage } from 'node:async_hooks';
import { newId } from '$lib/id';
import type { Actor } from '$lib/server/actor';
import { systemActor } from '$lib/server/actor';
import { actorFor } from '$lib/server/auth/actor';
import { readOwn } from '$lib/server/change';
import { unwrap } from '$lib/server/secret';
import { sendMail } from '$lib/server/mail/send';
import { setPasswordByLink } from '$lib/domain/person/link.commands.server';
import { confirmGrant, grantRole } from '$lib/domain/person/grant.commands.server';
import { invitePerson } from '$lib/domain/person/person.commands.server';
import type { Role } from '$lib/domain/person/roles';
import { clock } from '$lib/time/clock';
import { plainDateOf } from '$lib/time/dates';
import { config } from '$lib/server/config';

/** Sites act side by side, each at its own moment of the same day. */
const moments = new AsyncLocalStorage<{ instant: Date | null }>();
const shared: { instant: Date | null } = { instant: null };

/** The clock follows the demo until `leaveStage`. */
export const takeStage = (): void => clock.follow(() => (moments.getStore() ?? shared).instant);

export function leaveStage(): void {
	shared.instant = null;
	clock.follow(null);
}

/** Sets the clock for what follows; each act of the demo happens when it says it does. */
export function at(instant: Date): void {
	(moments.getStore() ?? shared).instant = instant;
}

/** Runs `work` with a moment of its own. */
export const besideOthers = <T>(work: () => Promise<T>): Promise<T> =>
	moments.run({ instant: shared.instant }, work);

/** One password for every account of the demo: long, and of no use anywhere else. */
export const demoPassword = 'linen warp and weft';

/** Invites a person and takes the invitation up, by the link that the mail carries. */
export async function join(
	administrator: Actor,
	person: { email: string; name: string }
): Promise<string> {
	const id = await invitePerson(administrator, person);
	const mail = await readOwn(systemActor('demo'), (reader) =>
		reader
			.selectFrom('mail')
			.select('secret')
			.where('person_id', '=', id)
			.where('kind', '=', 'invitation')
			.executeTakeFirstOrThrow()
	);
	const token = unwrap(mail.secret as Buffer)
		.split('/')
		.pop();
	await setPasswordByLink(token ?? '', 'invitation', demoPassword, newId());
	await postMail();
	return id;
}

export async function give(
	administrator: Actor,
	second: Actor,
	personId: string,
	role: Role,
	studyId = '',
	siteId = ''
): Promise<void> {
	const grantId = await grantRole(administrator, personId, {
		role,
		studyId,
		siteId,
		validFrom: plainDateOf(clock.now().toISOString().slice(0, 10)),
		validTo: ''
	});
	if (role === 'independent_statistician' || role === 'board_member')
		await confirmGrant(second, personId, { grantId, version: 1 });
}

/** The actor as the grants stand now. */
export const acting = (personId: string): Promise<Actor> => actorFor(personId, newId());

/** Hands over what waits to be sent, if the catcher listens; else the worker does it later. */
export async function postMail(): Promise<void> {
	if (!config().mail) return;
	const waiting = await readOwn(systemActor('demo'), (reader) =>
		reader
			.selectFrom('mail')
			.select('id')
			.where('status', '=', 'waiting')
			.orderBy('created_at')
			.execute()
	);
	for (const mail of waiting)
		await sendMail({ payload: { mailId: mail.id }, lastTry: false }).catch(() => {});
}
