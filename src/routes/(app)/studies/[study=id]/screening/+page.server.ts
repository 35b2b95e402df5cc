import { redirect } from '@sveltejs/kit';
import { addScreening } from '$lib/domain/subject/screening.commands.server';
import { findScreenings, findScreeningSites } from '$lib/domain/subject/screening.reads.server';
import { screeningInput, screeningsQuery } from '$lib/domain/subject/subject.input';
import { getStudy } from '$lib/domain/study/study.reads.server';
import { formFor, submit } from '$lib/server/forms';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const asked = screeningsQuery
		.pick({ site: true })
		.safeParse(Object.fromEntries(url.searchParams));
	const site = asked.success ? (asked.data.site ?? '') : '';
	return serve(async () => {
		const [sites, first, study] = await Promise.all([
			findScreeningSites(actor, params.study),
			findScreenings(actor, params.study, { site, limit: 50 }),
			getStudy(actor, params.study)
		]);
		const here = sites.find((each) => each.id === site) ?? sites[0];
		return {
			sites,
			first,
			site,
			open: study.status === 'open',
			form: await formFor(screeningInput, {
				siteId: here?.id ?? '',
				screenedOn: here?.today ?? ''
			})
		};
	});
};

export const actions: Actions = {
	default: async ({ request, locals, params }) => {
		let made = '';
		const answer = await submit(request, screeningInput, async (data) => {
			made = (await addScreening(actorOf({ locals }), params.study, data)).id;
		});
		if (made) redirect(303, `/studies/${params.study}/screening/${made}`);
		return answer;
	}
};
