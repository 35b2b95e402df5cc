import { z } from 'zod';
import { askForCodes, getCodePrints } from '$lib/domain/unmasking/codes.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

const askForm = z.object({
	siteId: z
		.string()
		.default('')
		.refine((text): boolean => z.uuid().safeParse(text).success, 'Choose one of the list.')
});

export const load: PageServerLoad = async ({ locals, params }) => {
	const actor = actorOf({ locals });
	return {
		...(await serve(() => getCodePrints(actor, params.study))),
		form: await formFor(askForm)
	};
};

export const actions: Actions = {
	default: ({ request, locals, params }) =>
		submit(request, askForm, async ({ siteId }) => {
			await askForCodes(actorOf({ locals }), params.study, siteId);
			return 'The sheets are being made.';
		})
};
