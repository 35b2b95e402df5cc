import { error, redirect } from '@sveltejs/kit';
import { findLink, setUp } from '$lib/domain/person/link.commands.server';
import { setUpInput } from '$lib/domain/person/person.input';
import { Refusal } from '$lib/refusal';
import { countTry } from '$lib/server/auth/throttle';
import { formFor, submit, withoutSecrets } from '$lib/server/forms';
import { keepAddress } from '$lib/server/link-pages';
import { serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async (event) => {
	keepAddress(event);
	if (!(await findLink(event.params.token, 'set-up', event.locals.requestId))) {
		const refusal = new Refusal('BAD_LINK');
		error(refusal.status, { message: refusal.message, code: refusal.code });
	}
	return { form: await formFor(setUpInput) };
};

export const actions: Actions = {
	default: async (event) => {
		await serve(() => countTry('address', event.getClientAddress()));
		return withoutSecrets(
			await submit(event.request, setUpInput, async ({ email, name, password }) => {
				await setUp(event.params.token, { email, name, password }, event.locals.requestId);
				redirect(303, '/sign-in?done=set-up');
			})
		);
	}
};
