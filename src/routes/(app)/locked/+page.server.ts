import { fail, redirect } from '@sveltejs/kit';
import { Refusal } from '$lib/refusal';
import { endSession, unlockSession } from '$lib/server/auth/session';
import type { Actions, PageServerLoad } from './$types';

const ownPath = (to: string | null) => (to && /^\/(?![/\\])/.test(to) ? to : '/');

export const load: PageServerLoad = ({ locals, url }) => {
	const to = ownPath(url.searchParams.get('to'));
	if (!locals.session?.locked) redirect(303, to);
	return { name: locals.session.name };
};

export const actions: Actions = {
	/** Whoever finds somebody else's locked screen can leave it, but not open it. */
	signOut: async ({ locals }) => {
		const actor = locals.lockedActor ?? locals.actor;
		if (actor) await endSession(actor, actor.sessionId ?? '');
		redirect(303, '/sign-in?done=out');
	},
	unlock: async ({ request, locals, url }) => {
		if (!locals.lockedActor) redirect(303, '/');
		const password = (await request.formData().catch(() => null))?.get('password');
		try {
			if (
				typeof password !== 'string' ||
				!(await unlockSession(locals.lockedActor, password.slice(0, 256)))
			)
				return fail(400, { said: 'That is not your password.' });
		} catch (thrown) {
			if (thrown instanceof Refusal) return fail(thrown.status, { said: thrown.message });
			throw thrown;
		}
		redirect(303, ownPath(url.searchParams.get('to')));
	}
};
