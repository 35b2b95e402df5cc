import { redirect } from '@sveltejs/kit';
import { changePassword } from '$lib/domain/person/person.commands.server';
import {
	changePasswordInput,
	endSessionInput,
	nothingInput
} from '$lib/domain/person/person.input';
import { getAccount } from '$lib/domain/person/person.reads.server';
import { endSession } from '$lib/server/auth/session';
import { formFor, submit, withoutSecrets } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	const actor = actorOf({ locals });
	const [account, password] = await Promise.all([
		serve(() => getAccount(actor)),
		formFor(changePasswordInput, undefined, 'password')
	]);
	return {
		name: actor.name,
		email: actor.email,
		here: actor.sessionId,
		...account,
		password
	};
};

export const actions: Actions = {
	/** A plain form, so that leaving works with scripts off too. */
	signOut: async (event) => {
		const actor = actorOf(event);
		await serve(() => endSession(actor, actor.sessionId ?? ''));
		for (const { name } of event.cookies.getAll())
			if (name.includes('authjs.session-token')) event.cookies.delete(name, { path: '/' });
		redirect(303, '/sign-in?done=out');
	},
	endSession: (event) =>
		submit(
			event.request,
			endSessionInput,
			async ({ sessionId }) => {
				await endSession(actorOf(event), sessionId);
				return 'That session has ended.';
			},
			'session'
		),
	endOthers: (event) =>
		submit(
			event.request,
			nothingInput,
			async () => {
				const actor = actorOf(event);
				const { sessions } = await getAccount(actor);
				for (const session of sessions)
					if (session.id !== actor.sessionId) await endSession(actor, session.id);
				return 'All other sessions have ended.';
			},
			'session'
		),
	password: async (event) =>
		withoutSecrets(
			await submit(
				event.request,
				changePasswordInput,
				async (given) => {
					await changePassword(actorOf(event), given);
					return 'Your password is changed, and your other sessions have ended.';
				},
				'password'
			)
		)
};
