import { redirect } from '@sveltejs/kit';
import { getHistory } from '$lib/domain/measurement/history.reads.server';
import { getVisitForm } from '$lib/domain/measurement/visit-form.reads.server';
import { finishVisit, startVisit } from '$lib/domain/visit/conduct.commands.server';
import { visitStepForm } from '$lib/domain/visit/visit.input';
import { isId } from '$lib/id';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const asked = url.searchParams.get('history');
	return serve(async () => {
		const form = await getVisitForm(actor, params.study, params.visit);
		const { version, status } = form.visit;
		const view = form.measures.find((each) => each.measureId === asked && each.kept);
		return {
			form,
			correcting:
				status === 'completed' && form.may.measure && url.searchParams.get('correct') === 'yes',
			history:
				view && isId(asked)
					? {
							name: view.measure.name,
							items: await getHistory(actor, params.study, params.visit, asked)
						}
					: null,
			startForm: await formFor(visitStepForm, { version }, 'start'),
			finishForm: await formFor(visitStepForm, { version }, 'finish')
		};
	});
};

export const actions: Actions = {
	start: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			visitStepForm,
			async ({ version }) => {
				await startVisit(actor, params.study, params.visit, version);
			},
			'start'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}`);
	},
	finish: async ({ request, locals, params }) => {
		const actor = actorOf({ locals });
		const answer = await submit(
			request,
			visitStepForm,
			async ({ version }) => {
				await finishVisit(actor, params.study, params.visit, version);
			},
			'finish'
		);
		if ('status' in answer) return answer;
		redirect(303, `/studies/${params.study}/visits/${params.visit}?done=finished`);
	}
};
