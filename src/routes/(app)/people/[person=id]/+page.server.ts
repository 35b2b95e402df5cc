import { confirmGrant, endGrant, grantRole } from '$lib/domain/person/grant.commands.server';
import { inviteAgain, setActive } from '$lib/domain/person/person.commands.server';
import {
	activeInput,
	confirmGrantInput,
	endGrantInput,
	grantInput,
	nothingInput
} from '$lib/domain/person/person.input';
import { getPerson } from '$lib/domain/person/person.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import { clock } from '$lib/time/clock';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	const [person, grant] = await Promise.all([
		serve(() => getPerson(actor, params.person)),
		formFor(
			grantInput,
			{ role: '' as never, validFrom: clock.now().toISOString().slice(0, 10) },
			'grant'
		)
	]);
	return { person, grant, me: actor.personId, today: clock.now().toISOString().slice(0, 10) };
};

export const actions: Actions = {
	grant: (event) =>
		submit(
			event.request,
			grantInput,
			async (input) => {
				await grantRole(actorOf(event), event.params.person, input);
				return 'The role is granted.';
			},
			'grant'
		),
	confirm: (event) =>
		submit(
			event.request,
			confirmGrantInput,
			async (input) => {
				await confirmGrant(actorOf(event), event.params.person, input);
				return 'The role is confirmed.';
			},
			'roles'
		),
	end: (event) =>
		submit(
			event.request,
			endGrantInput,
			async (input) => {
				await endGrant(actorOf(event), event.params.person, input);
				return input.validTo ? `The role ends with ${input.validTo}.` : 'The role has ended.';
			},
			'roles'
		),
	invite: (event) =>
		submit(
			event.request,
			nothingInput,
			async () => {
				await inviteAgain(actorOf(event), event.params.person);
				return 'A new invitation is on its way; the earlier link no longer works.';
			},
			'account'
		),
	active: (event) =>
		submit(
			event.request,
			activeInput,
			async ({ active, version }) => {
				await setActive(actorOf(event), event.params.person, { active: active === 'yes', version });
				return active === 'yes'
					? 'The account is in use again.'
					: 'The account is switched off and all its sessions have ended.';
			},
			'account'
		)
};
