import { publishProtocol } from '$lib/domain/study/study.commands.server';
import { publishInput } from '$lib/domain/study/study.input';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf } from '$lib/server/serve';
import { redirect } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, parent }) => {
	const actor = actorOf({ locals });
	const { draft } = await parent();
	return {
		mayPublish: may(actor.grants, 'study.publish', { studyId: params.study }),
		publish: await formFor(publishInput, { version: draft?.version ?? 1 }, 'publish')
	};
};

export const actions: Actions = {
	publish: async ({ request, locals, params }) => {
		let done = false;
		const answer = await submit(
			request,
			publishInput,
			async ({ version }) => {
				await publishProtocol(actorOf({ locals }), params.study, version);
				done = true;
			},
			'publish'
		);
		if (done) redirect(303, `/studies/${params.study}/schedule?published=yes`);
		return answer;
	}
};
