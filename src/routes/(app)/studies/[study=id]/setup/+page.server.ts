import { publishAmendmentForm } from '$lib/domain/amendment/amendment.input';
import { findAmends } from '$lib/domain/amendment/amends.reads.server';
import { publishProtocol } from '$lib/domain/study/study.commands.server';
import { publishInput } from '$lib/domain/study/study.input';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import { redirect } from '@sveltejs/kit';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, parent }) => {
	const actor = actorOf({ locals });
	const { draft, number } = await parent();
	return {
		mayPublish: may(actor.grants, 'study.publish', { studyId: params.study }),
		amends: draft && number > 1 ? await serve(() => findAmends(actor, params.study)) : null,
		publishAmendment: await formFor(
			publishAmendmentForm,
			{ approvedOn: '', reconsent: '', reconsentBy: '', version: draft?.version ?? 1 },
			'publishAmendment'
		),
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
	},
	publishAmendment: async ({ request, locals, params }) => {
		let done = '';
		const answer = await submit(
			request,
			publishAmendmentForm,
			async ({ version, ...answers }) => {
				const { followed, jobRunId } = await publishProtocol(
					actorOf({ locals }),
					params.study,
					version,
					answers
				);
				done = jobRunId ? 'many' : String(followed);
			},
			'publishAmendment'
		);
		if (done !== '')
			redirect(303, `/studies/${params.study}/schedule?published=yes&follow=${done}`);
		return answer;
	}
};
