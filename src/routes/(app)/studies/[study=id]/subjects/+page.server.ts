import { contactSearchInput } from '$lib/domain/subject/subject.input';
import { searchContacts, type ContactFound } from '$lib/domain/subject/contact-search.server';
import { formFor, submit } from '$lib/server/forms';
import { may } from '$lib/server/permission';
import { findSites } from '$lib/domain/study/study.reads.server';
import { threadsQuery } from '$lib/domain/subject/subject.input';
import { findThreads, getThreadFrame } from '$lib/domain/subject/threads.reads.server';
import { actorOf, serve } from '$lib/server/serve';
import type { Actions, PageServerLoad } from './$types';

const addressed = threadsQuery.omit({ cursor: true, limit: true });

export const load: PageServerLoad = async ({ locals, params, url }) => {
	const actor = actorOf({ locals });
	const asked = addressed.safeParse(Object.fromEntries(url.searchParams));
	// An address that makes no sense shows everything rather than nothing.
	const filter = asked.success ? asked.data : addressed.parse({});
	return serve(async () => {
		const [sites, frame, first] = await Promise.all([
			findSites(actor, params.study),
			getThreadFrame(actor, params.study, filter),
			findThreads(actor, params.study, { ...filter, limit: 40 })
		]);
		return {
			sites,
			frame,
			first,
			filter,
			byName: may(actor.grants, 'contact.read', { studyId: params.study })
				? await formFor(contactSearchInput, { name: '' }, 'byName')
				: null,
			view: url.searchParams.get('view') === 'table' ? ('table' as const) : ('threads' as const)
		};
	});
};

export const actions: Actions = {
	default: async ({ request, locals, params }) => {
		let found: { items: ContactFound[]; more: boolean } | null = null;
		const answer = await submit(
			request,
			contactSearchInput,
			async (data) => {
				found = await searchContacts(actorOf({ locals }), params.study, data);
				return 'Found.';
			},
			'byName'
		);
		// A refusal's own answer stays one; what was found goes beside the form.
		return found === null || !('form' in answer)
			? answer
			: { ...answer, found: found as { items: ContactFound[]; more: boolean } };
	}
};
