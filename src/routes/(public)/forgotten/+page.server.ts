import { requestReset } from '$lib/domain/person/link.commands.server';
import { forgottenInput } from '$lib/domain/person/person.input';
import { countTry } from '$lib/server/auth/throttle';
import { formFor, submit } from '$lib/server/forms';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async () => ({ form: await formFor(forgottenInput) });

export const actions: Actions = {
	default: ({ request, locals, getClientAddress }) =>
		submit(request, forgottenInput, async ({ email }) => {
			await countTry('address', getClientAddress());
			await requestReset(email, locals.requestId);
			return 'If there is an account with this address, a mail with a link is on its way. The link works once and for one hour.';
		})
};
