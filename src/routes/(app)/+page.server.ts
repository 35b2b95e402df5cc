import { redirect } from '@sveltejs/kit';
import { findStudies } from '$lib/domain/study/study.reads.server';
import { may } from '$lib/server/permission';
import { actorOf, serve } from '$lib/server/serve';
import type { PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals }) => {
	const actor = actorOf({ locals });
	const studies = await serve(() => findStudies(actor));
	const general = may(actor.grants, 'person.manage', {}) || may(actor.grants, 'study.create', {});
	// One study and nothing else to choose from: that is where the work is.
	if (studies.length === 1 && !general) redirect(303, `/studies/${studies[0]?.id}`);
	return {
		studies,
		mayCreate: may(actor.grants, 'study.create', {}),
		mayManage: may(actor.grants, 'person.manage', {})
	};
};
