import { redirect } from '@sveltejs/kit';
import { createBlankStudy } from '$lib/domain/study/study.commands.server';
import { createBlankForm } from '$lib/domain/study/study.input';
import { templateHeads } from '$lib/domain/study/templates.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	actorOf({ locals });
	return {
		templates: templateHeads,
		form: await formFor(createBlankForm, { code: '', name: '', training: false })
	};
};

export const actions: Actions = {
	default: async ({ request, locals }) => {
		let made = '';
		const answer = await submit(request, createBlankForm, async (data) => {
			made = (await createBlankStudy(actorOf({ locals }), data)).studyId;
		});
		if (made) redirect(303, `/studies/${made}/setup`);
		return answer;
	}
};
