import { z } from 'zod';
import { letFollowNow } from '$lib/domain/amendment/amendment.commands.server';
import { findReconsents } from '$lib/domain/consent/reconsent.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

const nothing = z.object({});

export const load: PageServerLoad = async ({ locals, params }) => ({
	...(await serve(() => findReconsents(actorOf({ locals }), params.study))),
	follow: await formFor(nothing, {}, 'follow')
});

export const actions: Actions = {
	default: ({ request, locals, params }) =>
		submit(
			request,
			nothing,
			async () => {
				const { followed, jobRunId } = await letFollowNow(actorOf({ locals }), params.study);
				return jobRunId
					? 'They follow it one after the other. The jobs page shows how far it is.'
					: `${followed === 1 ? 'One subject follows' : `${followed} subjects follow`} the newest version.`;
			},
			'follow'
		)
};
